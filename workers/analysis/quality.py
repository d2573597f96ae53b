"""How well shaped the elements are: the worst of each measure, where, and how many are poor.

All measures are taken at the corners, where shapes fail first, with the true directions of curved
sides; the best value is 60 or 90 degrees, 1 and 1.
"""

from collections.abc import Callable
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from elements.contract import ElementType
from workers.analysis.mesh import Mesh

Array = NDArray[np.float64]

CHUNK = 65_536  # elements at a time, which bounds the memory


class Measure(NamedTuple):
    """worst : picks the worst of many values; limit : beyond it an element counts as poor."""

    worst: Callable[[Array], np.intp]
    limit: float

    def is_poor(self, values: Array) -> NDArray[np.bool_]:
        return values > self.limit if self.worst is np.argmax else values < self.limit


# The limits are common practice: stresses in an element beyond them deserve a second look.
MEASURES: dict[str, Measure] = {
    "min_angle": Measure(np.argmin, 20.0),
    "max_aspect": Measure(np.argmax, 10.0),
    "min_scaled_jacobian": Measure(np.argmin, 0.2),
}


def mesh_quality(mesh: Mesh) -> dict[str, Any]:
    """Worst element by each measure.

    Returns
    -------
    dict   "min_angle" [degrees], "max_aspect", "min_scaled_jacobian", each with `value`, `at`
        (the element's centre [x, y]), `limit` and `bad`, the number of elements beyond it
    """
    values: dict[str, list[Array]] = {name: [] for name in MEASURES}
    centres = []
    for block in mesh.blocks:
        for first in range(0, block.element_count, CHUNK):
            coords = mesh.nodes[block.connectivity[first : first + CHUNK]]
            centres.append(coords[:, : block.element.corners].mean(axis=1))
            for name, found in element_quality(block.element, coords).items():
                values[name].append(found)
    at = np.concatenate(centres)
    return {
        name: _summary(np.concatenate(values[name]), measure, at)
        for name, measure in MEASURES.items()
    }


def _summary(values: Array, measure: Measure, at: Array) -> dict[str, Any]:
    worst = int(measure.worst(values))
    return {
        "value": float(values[worst]),
        "at": at[worst].tolist(),
        "limit": measure.limit,
        "bad": int(measure.is_poor(values).sum()),
    }


def element_quality(element: ElementType, coords: Array) -> dict[str, Array]:
    """The measures of each element, (m,) by name; coords is (m, n, 2) [L].

    min_angle : smallest corner angle [degrees]
    max_aspect : triangles: longest side over its altitude, times sqrt(3)/2; quadrilaterals: ratio
        of the lines that join the middles of opposite sides
    min_scaled_jacobian : smallest sine of a corner angle, negative beyond 180 degrees; times
        2/sqrt(3) for triangles

    References
    ----------
    Knupp, "Algebraic mesh quality metrics for unstructured initial meshes", Finite Elements in
    Analysis and Design 39 (2003), for the scaled Jacobian.
    """
    leaving, arriving = _directions(element, coords)
    arriving = np.roll(arriving, 1, axis=1)  # of the side before the corner
    sine = _cross(arriving, leaving)
    cosine = -(arriving * leaving).sum(axis=2)
    angle = np.degrees(np.arctan2(sine, cosine)) % 360
    ideal = 2 / np.sqrt(3) if element.is_triangle else 1.0
    return {
        "min_angle": angle.min(axis=1),
        "max_aspect": aspect_ratio(coords[:, : element.corners]),
        "min_scaled_jacobian": ideal * sine.min(axis=1),
    }


def _directions(element: ElementType, coords: Array) -> tuple[Array, Array]:
    """Unit tangents at the start and at the end of every side, (m, corners, 2)."""
    a, b = (coords[:, [side[end] for side in element.sides]] for end in (0, 1))
    start = end = b - a
    if element.order > 1:
        mid = coords[:, [side[-1] for side in element.sides]]
        bow = 4 * mid - 2 * (a + b)  # of the parabola through a, mid, b
        start, end = b - a + bow, b - a - bow
    return _unit(start), _unit(end)


def aspect_ratio(corners: Array) -> Array:
    """`max_aspect` of elements with straight sides, (m,); corners is (m, 3 or 4, 2) [L]."""
    following = np.roll(corners, -1, axis=1)
    if corners.shape[1] == 3:
        longest = ((following - corners) ** 2).sum(axis=2).max(axis=1)
        double_area = _cross(corners[:, 1] - corners[:, 0], corners[:, 2] - corners[:, 0])
        return np.sqrt(3) / 2 * longest / double_area
    middles = (corners + following) / 2
    lines = np.linalg.norm(middles[:, 2:] - middles[:, :2], axis=2)
    return lines.max(axis=1) / lines.min(axis=1)


def _unit(vectors: Array) -> Array:
    return vectors / np.linalg.norm(vectors, axis=-1, keepdims=True)


def _cross(a: Array, b: Array) -> Array:
    return a[..., 0] * b[..., 1] - a[..., 1] * b[..., 0]
