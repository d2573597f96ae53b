"""Tints with hatchings: areas that can be told apart on a grey print as well as in colour.

The tints are light, so that the hatching shows and letters can stand on them; their lightness is
nearly the same, so that in grey only the hatching speaks, and no area looks worse than another.
"""

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from workers.outputs.drawing.palette import rgb

Pixels = NDArray[np.uint8]
Numbers = NDArray[np.int64]
Pattern = Callable[[Numbers, Numbers], NDArray[np.bool_]]  # of x and y [pixels]

REST = "#eceff1"  # whatever has no number of its own
INK_SHARE = 0.55  # of the hatching's own colour in its lines


def _lines(period: int, width: int, along: Callable[[Numbers, Numbers], Numbers]) -> Pattern:
    return lambda x, y: along(x, y) % period < width


def _plain(x: Numbers, y: Numbers) -> NDArray[np.bool_]:
    return np.zeros(np.broadcast(x, y).shape, bool)


def _dots(x: Numbers, y: Numbers) -> NDArray[np.bool_]:
    row = y // 12
    return ((x + 6 * (row % 2)) % 12 - 6) ** 2 + (y % 12 - 6) ** 2 <= 6


def _both(one: Pattern, other: Pattern) -> Pattern:
    return lambda x, y: one(x, y) | other(x, y)


_RISING = _lines(16, 3, lambda x, y: x + y)
_FALLING = _lines(16, 3, lambda x, y: x - y)
_LYING = _lines(12, 2, lambda x, y: y + 0 * x)
_UPRIGHT = _lines(12, 2, lambda x, y: x + 0 * y)

# Tint, colour of the hatching, pattern; neighbours in the list differ in all three.
HATCHINGS: tuple[tuple[str, str, Pattern], ...] = (
    ("#f6dcc4", "#7a3b0c", _plain),
    ("#cfe3f2", "#16456b", _RISING),
    ("#dcebc7", "#3c5a14", _LYING),
    ("#ead7ec", "#5c2a66", _dots),
    ("#cdeae4", "#0c5a4d", _FALLING),
    ("#f3e6ad", "#6b5600", _UPRIGHT),
    ("#f5d3d6", "#7d1a26", _both(_RISING, _FALLING)),
    ("#d9dcf0", "#2c3478", _both(_LYING, _UPRIGHT)),
)


def hatch(numbers: Numbers) -> Pixels:
    """Colour an image of area numbers.

    numbers : (h, w)   index into HATCHINGS; len(HATCHINGS) for the rest, -1 for blank paper

    Returns
    -------
    (h, w, 3)
    """
    y, x = np.ogrid[: numbers.shape[0], : numbers.shape[1]]
    image = np.full((*numbers.shape, 3), 255, np.uint8)
    for number, (tint, ink, pattern) in enumerate(HATCHINGS):
        here = numbers == number
        image[here] = rgb(tint)
        lined = here & pattern(x, y)
        image[lined] = np.round(INK_SHARE * rgb(ink) + (1 - INK_SHARE) * rgb(tint))
    image[numbers == len(HATCHINGS)] = rgb(REST)
    return image


def swatch(number: int, width: int, height: int) -> Pixels:
    """A piece of one area, for a legend."""
    return hatch(np.full((height, width), number))
