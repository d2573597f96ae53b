"""Colours: the inks of the drawing and the two colour maps of the fields.

Both maps are built here in OKLab (Ottosson, "A perceptual color space for image processing",
2020), in which equal steps look about equally large. `SEQUENTIAL` runs from pale water over sea
green and ochre to a dark rust: its lightness falls all the way, so a grey print keeps the order.
`DIVERGING` is near white at zero and darkens to blue (compression) and rust (tension); in grey the
sign is carried by the isolines, dashed where negative.
"""

import numpy as np
from numpy.typing import NDArray

Colour = tuple[float, float, float]

STEPS = 256

# Inks. Text and outline are near black; supports and loads keep apart by shape as well as hue.
INK = "#1d2329"
FAINT = "#5b6670"
HAIRLINE = "#9aa5ad"
PAPER = "#ffffff"
PLATE = "#e4e9ec"
PLATE_THICK = "#c3cdd4"
PLATE_THIN = "#f3f5f6"
SUPPORT = "#0d5c63"
LOAD = "#a8330f"
SEVERITY_COLOURS = {"stop": "#8e1616", "check": "#8a5a00", "note": "#5b6670"}

# Control points as lightness, chroma, hue in degrees.
_SEQUENTIAL_POINTS = (
    (0.955, 0.018, 225.0),
    (0.870, 0.065, 195.0),
    (0.790, 0.105, 150.0),
    (0.715, 0.130, 105.0),
    (0.620, 0.140, 70.0),
    (0.510, 0.150, 45.0),
    (0.390, 0.130, 30.0),
    (0.270, 0.085, 20.0),
)
_COMPRESSION_POINTS = (
    (0.300, 0.110, 265.0),
    (0.450, 0.135, 258.0),
    (0.620, 0.120, 248.0),
    (0.800, 0.065, 238.0),
    (0.965, 0.004, 230.0),
)
_TENSION_POINTS = (
    (0.965, 0.004, 60.0),
    (0.830, 0.085, 65.0),
    (0.660, 0.145, 52.0),
    (0.480, 0.150, 38.0),
    (0.300, 0.105, 25.0),
)


def _oklab(points: tuple[tuple[float, float, float], ...]) -> NDArray[np.float64]:
    lightness, chroma, hue = np.array(points).T
    return np.column_stack(
        (lightness, chroma * np.cos(np.radians(hue)), chroma * np.sin(np.radians(hue)))
    )


def _even_steps(points: NDArray[np.float64], count: int) -> NDArray[np.float64]:
    """The path through the points in steps of equal length, that is of equal look."""
    path = points
    for _ in range(4):  # Chaikin's corner cutting rounds the path, ends kept
        cut = np.concatenate(
            (0.75 * path[:-1] + 0.25 * path[1:], 0.25 * path[:-1] + 0.75 * path[1:])
        )
        path = np.vstack((path[:1], cut.reshape(2, -1, 3).swapaxes(0, 1).reshape(-1, 3), path[-1:]))
    run = np.concatenate(([0.0], np.cumsum(np.linalg.norm(np.diff(path, axis=0), axis=1))))
    at = np.linspace(0.0, run[-1], count)
    return np.column_stack([np.interp(at, run, column) for column in path.T])


def _to_srgb(lab: NDArray[np.float64]) -> NDArray[np.uint8]:
    to_cone = np.array(
        [
            [1.0, 0.3963377774, 0.2158037573],
            [1.0, -0.1055613458, -0.0638541728],
            [1.0, -0.0894841775, -1.2914855480],
        ]
    )
    to_linear = np.array(
        [
            [4.0767416621, -3.3077115913, 0.2309699292],
            [-1.2684380046, 2.6097574011, -0.3413193965],
            [-0.0041960863, -0.7034186147, 1.7076147010],
        ]
    )
    linear = np.clip((lab @ to_cone.T) ** 3 @ to_linear.T, 0.0, 1.0)
    encoded = np.where(linear > 0.0031308, 1.055 * linear ** (1 / 2.4) - 0.055, 12.92 * linear)
    return np.round(255 * encoded).astype(np.uint8)


SEQUENTIAL: NDArray[np.uint8] = _to_srgb(_even_steps(_oklab(_SEQUENTIAL_POINTS), STEPS))
DIVERGING: NDArray[np.uint8] = np.vstack(
    (
        _to_srgb(_even_steps(_oklab(_COMPRESSION_POINTS), STEPS // 2)),
        _to_srgb(_even_steps(_oklab(_TENSION_POINTS), STEPS // 2)),
    )
)


def rgb(colour: str) -> NDArray[np.uint8]:
    """The three parts of an ink."""
    return np.array([int(colour[i : i + 2], 16) for i in (1, 3, 5)], np.uint8)


def grey(colours: NDArray) -> NDArray[np.float64]:
    """Luma of 8-bit colours as grey printers form it (ITU-R BT.601), (..., 3) -> (...)."""
    return np.asarray(colours, float) @ np.array([0.299, 0.587, 0.114])
