"""Paints one triangle and looks at it: run as a module, by `offscreen.py`, in a process of its own.

Ends with exit code 0 only if the pixels are right.
"""

import sys

import numpy as np

from workers.outputs.drawing.raster import paint


def paint_one_triangle() -> str | None:
    """What is wrong with the picture, None when it is right."""
    corners = np.array([(0.0, 0.0), (64.0, 0.0), (0.0, 64.0)])
    colours = np.array([(10, 20, 200)] * 2, np.uint8)
    picture = paint(
        (64, 64), corners, np.array([(0, 1, 2)]), np.zeros(3), colours=colours, limits=(0, 1)
    )
    inside, outside = tuple(picture[50, 10]), tuple(picture[10, 50])
    if inside != (10, 20, 200) or outside != (255, 255, 255):
        return f"the test picture came out wrong: {inside} inside, {outside} outside"
    return None


if __name__ == "__main__":
    sys.exit(paint_one_triangle())
