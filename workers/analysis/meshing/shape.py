"""Which elements have no usable shape: clockwise, flat, bent in on themselves, folded.

The test is that of the isoparametric map, det J > 0. On an element with straight sides its corners
decide; on a curved one it is sampled on a lattice, corners included.
"""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from elements.contract import ElementType

Array = NDArray[np.float64]

# det J and areas below this part of (longest side)^2 count as none: rounding reaches 1e-15.
FLAT = 1e-9
# A mid-side node this close to the middle (part of the side's length) leaves the side straight.
STRAIGHT = 1e-9
LATTICE = 4  # intervals along each side of a curved element
CHUNK = 16_384  # elements at a time, which bounds the memory


class ShapeFault(NamedTuple):
    """An element without usable shape, and what was seen."""

    element: int
    message: str


def shape_faults(element: ElementType, connectivity: NDArray, nodes: Array) -> list[ShapeFault]:
    """Elements on which det J is not positive everywhere.

    Parameters
    ----------
    connectivity : (m, n) int   of one block
    nodes : (N, 2)              positions [L]
    """
    faults = []
    for first in range(0, len(connectivity), CHUNK):
        numbers = connectivity[first : first + CHUNK]
        coords = nodes[numbers]
        for bad in np.flatnonzero(~_usable(element, coords)):
            message = _describe(element, coords[bad], numbers[bad])
            faults.append(ShapeFault(first + int(bad), message))
    return faults


def _usable(element: ElementType, coords: Array) -> NDArray[np.bool_]:
    corners = coords[:, : element.corners]
    sides = np.roll(corners, -1, axis=1) - corners
    least = FLAT * (sides**2).sum(axis=2).max(axis=1)
    turns = _cross(np.roll(sides, 1, axis=1), sides)
    usable = (turns > least[:, None]).all(axis=1)
    if element.order > 1:
        curved = np.flatnonzero(_mid_offsets(element, coords).max(axis=1) > STRAIGHT)
        det_J = jacobian_determinants(element, coords[curved], lattice(element))
        usable[curved] = det_J.min(axis=1) > least[curved]
    return usable


def lattice(element: ElementType) -> Array:
    """Natural points spread evenly over an element, corners included, (q, 2)."""
    i, j = np.divmod(np.arange((LATTICE + 1) ** 2), LATTICE + 1)
    points = np.stack((i, j), axis=1) / LATTICE
    return points[i + j <= LATTICE] if element.is_triangle else 2 * points - 1


def jacobian_determinants(element: ElementType, coords: Array, points: Array) -> Array:
    """det J of each element at natural points, of whatever sign, (m, q) [L^2]."""
    slopes = element.gradients(points).reshape(-1, element.node_count)
    x, y = (coords[:, :, axis] @ slopes.T for axis in (0, 1))
    return x[:, 0::2] * y[:, 1::2] - x[:, 1::2] * y[:, 0::2]


def _mid_offsets(element: ElementType, coords: Array) -> Array:
    """Distance of each mid-side node from the middle of its side, over the side's length."""
    a, b, mid = (coords[:, list(local)] for local in zip(*element.sides, strict=True))
    length = np.linalg.norm(b - a, axis=2)
    return np.linalg.norm(mid - (a + b) / 2, axis=2) / np.where(length > 0, length, 1)


def _cross(a: Array, b: Array) -> Array:
    return a[..., 0] * b[..., 1] - a[..., 1] * b[..., 0]


# --- what to say ---------------------------------------------------------------------------------


def _describe(element: ElementType, coords: Array, numbers: NDArray) -> str:
    """Say what is wrong with the shape of one element; coords (n, 2), numbers (n,)."""
    c = element.corners
    corners = coords[:c]
    sides = np.roll(corners, -1, axis=0) - corners
    area, size = _polygon_area(corners), (sides**2).sum(axis=1).max()
    listed = ", ".join(str(n) for n in numbers[:c])
    if abs(area) <= FLAT * size:
        return f"{element.name} with corners {listed} is flat: its area is {area:.3g}"
    if area < 0:
        return (
            f"{element.name} with corners {listed} is listed clockwise (area {area:.6g}); list "
            "the corners counter-clockwise"
        )
    turns = _cross(np.roll(sides, 1, axis=0), sides)
    if element.order > 1 and _mid_offsets(element, coords[None]).max() > STRAIGHT:
        return _describe_fold(element, coords, numbers)
    negative = np.flatnonzero(turns <= FLAT * size)
    if len(negative) > 1:
        return (
            f"{element.name} with corners {listed} crosses itself like a bow-tie; list the corners "
            "in order around the element, counter-clockwise"
        )
    return (
        f"{element.name} with corners {listed} has an angle of 180 degrees or more at node "
        f"{numbers[negative[0]]}, {_at(corners[negative[0]])}; every corner angle must be below 180"
    )


def _describe_fold(element: ElementType, coords: Array, numbers: NDArray) -> str:
    points = lattice(element)
    det_J = jacobian_determinants(element, coords[None], points)[0]
    worst = int(det_J.argmin())
    place = element.shape_functions(points[worst : worst + 1])[0] @ coords
    side = int(_mid_offsets(element, coords[None])[0].argmax())
    a, b, mid = list(element.sides[side])[0:3]
    listed = ", ".join(str(n) for n in numbers[: element.corners])
    return (
        f"{element.name} with corners {listed} is folded near {_at(place)} (det J "
        f"{det_J[worst]:.3g}): mid-side node {numbers[mid]} at {_at(coords[mid])} is too far from "
        f"the middle {_at((coords[a] + coords[b]) / 2)} between nodes {numbers[a]} and {numbers[b]}"
    )


def _polygon_area(corners: Array) -> float:
    return float(_cross(corners, np.roll(corners, -1, axis=0)).sum() / 2)


def _at(point: Array) -> str:
    return f"({point[0]:.6g}, {point[1]:.6g})"
