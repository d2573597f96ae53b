"""Where the plate lies on the picture: plate coordinates to pixels and back."""

from dataclasses import dataclass
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray

Array = NDArray[np.floating[Any]]


class Box(NamedTuple):
    """An upright rectangle of the picture [pixels], y upward."""

    left: float
    bottom: float
    right: float
    top: float

    @property
    def width(self) -> float:
        return self.right - self.left

    @property
    def height(self) -> float:
        return self.top - self.bottom

    def inset(self, left: float, bottom: float, right: float, top: float) -> "Box":
        return Box(self.left + left, self.bottom + bottom, self.right - right, self.top - top)


@dataclass(frozen=True, eq=False)
class View:
    """pixel = origin + scale * position."""

    scale: float  # pixels per length [1/L]
    origin: Array

    @classmethod
    def fit(cls, low: ArrayLike, high: ArrayLike, box: Box) -> "View":
        """The largest view that shows all between two corners, centred in the box."""
        low, high = np.asarray(low, float), np.asarray(high, float)
        extent = high - low
        available = np.array([box.width, box.height])
        with np.errstate(divide="ignore"):
            scale = float(np.min(available / extent))
        centre = np.array([box.left + box.right, box.bottom + box.top]) / 2
        return cls(scale, centre - scale * (low + high) / 2)

    def pixels(self, position: ArrayLike) -> Array:
        return self.origin + self.scale * np.asarray(position, float)

    def position(self, pixels: ArrayLike) -> Array:
        return (np.asarray(pixels, float) - self.origin) / self.scale
