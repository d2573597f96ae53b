"""Pictures of a plate, read back as pixels."""

from pathlib import Path

import numpy as np
from PIL import Image
from scipy import ndimage

from workers.outputs.drawing.palette import INK


def like_ink(pixels: np.ndarray) -> np.ndarray:
    """Near the ink of outlines; the dark end of the colour map is 40 steps redder."""
    ink = np.array([int(INK[i : i + 2], 16) for i in (1, 3, 5)])
    return np.abs(pixels - ink).max(axis=-1) < 30


class Picture:
    """A picture read back; places are given as parts of the plate's width and height."""

    def __init__(self, path: Path) -> None:
        with Image.open(path) as image:
            self.pixels = np.asarray(image.convert("RGB")).astype(int)
            self.text = image.text
        # The outline of the plate is the widest connected patch of ink.
        patches, _ = ndimage.label(like_ink(self.pixels), structure=np.ones((3, 3)))
        boxes = ndimage.find_objects(patches)
        rows, columns = max(
            boxes, key=lambda b: (b[0].stop - b[0].start) * (b[1].stop - b[1].start)
        )
        # The line is 2.6 pixels wide: its middle, to a pixel.
        self.left, self.right = columns.start + 0.5, columns.stop - 1.5
        self.top, self.bottom = rows.start + 0.5, rows.stop - 1.5

    @property
    def width(self) -> float:
        return self.right - self.left

    @property
    def height(self) -> float:
        return self.bottom - self.top

    def place(self, s: float, t: float) -> tuple[int, int]:
        return round(self.bottom - t * self.height), round(self.left + s * self.width)

    def at(self, s: float, t: float) -> np.ndarray:
        return self.pixels[self.place(s, t)]
