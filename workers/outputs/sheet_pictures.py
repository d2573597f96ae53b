"""The pictures of a review sheet: what the files show between their title and their cautions.

The sheet has a title and the cautions itself; the files keep theirs, for when they go alone.
"""

from base64 import b64encode
from dataclasses import dataclass
from pathlib import Path

from PIL import Image

from workers.outputs.drawing.page import WINDOW
from workers.outputs.names import file_name

PICTURES = ("model", "von_mises", "deformed", "principal_max", "principal_min")


@dataclass(frozen=True)
class Picture:
    """A PNG file as a data URI, its width, and the rows of it that are to be shown [pixels]."""

    source: str
    width: int
    height: int
    above: int
    below: int

    @property
    def offset(self) -> float:
        """How far down the window lies among what is hidden, in percent, as CSS wants it."""
        hidden = self.above + self.below
        return round(100 * self.above / hidden, 3) if hidden else 0.0


def find_pictures(folder: Path, state: str) -> dict[str, Picture]:
    """The pictures of a state that have been drawn, by quantity."""
    here = folder / "previews" / file_name(state)
    found = {quantity: find_picture(here / f"{quantity}.png") for quantity in PICTURES}
    return {quantity: picture for quantity, picture in found.items() if picture is not None}


def find_picture(path: Path) -> Picture | None:
    """The picture in a file, which may have a window written into it; None without a file."""
    if not path.is_file():
        return None
    data = b64encode(path.read_bytes()).decode()
    with Image.open(path) as image:
        (width, height), window = image.size, image.info.get(WINDOW)
    first, last = map(int, window.split()) if window else (0, height)
    return Picture(f"data:image/png;base64,{data}", width, last - first, first, height - last)
