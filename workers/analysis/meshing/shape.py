"""Which elements have no usable shape: clockwise, flat, bent in on themselves, folded.

The test is that of the isoparametric map, det J > 0. On an element with straight sides its corners
decide; on a curved one it is sampled, corners included.
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
# Intervals along each side of a curved element at which det J is sampled; the fine ones where det J
# varies by more than UNEVEN.
COARSE, FINE = 4, 24
UNEVEN = 0.25
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
        # Components first and elements last: sums over few nodes are then fast.
        x, y = np.ascontiguousarray(nodes[numbers].transpose(2, 1, 0))
        for bad in np.flatnonzero(~_usable(element, x, y)):
            message = _describe(element, nodes[numbers[bad]], numbers[bad])
            faults.append(ShapeFault(first + int(bad), message))
    return faults


def _usable(element: ElementType, x: Array, y: Array) -> NDArray[np.bool_]:
    """Whether det J is positive on elements with nodes x, y, (n, m) each; (m,)."""
    turns, size = _turns(element, x, y)
    least = FLAT * size
    usable = np.asarray((turns > least).all(axis=0))
    if element.order > 1:
        curved = np.flatnonzero(_mid_offsets(element, x, y).max(axis=0) > STRAIGHT)
        usable[curved] = _never_folded(element, x[:, curved], y[:, curved], least[curved])
    return usable


def _never_folded(element: ElementType, x: Array, y: Array, least: Array) -> NDArray[np.bool_]:
    """Whether det J stays above `least`; looked at closely where it varies much."""
    det_J = _jacobian_determinants(element, x, y, _samples(element, COARSE))
    low, high = det_J.min(axis=0), det_J.max(axis=0)
    usable = np.asarray(low > least)
    close = np.flatnonzero(usable & (low < UNEVEN * high))
    det_J = _jacobian_determinants(element, x[:, close], y[:, close], _samples(element, FINE))
    usable[close] = det_J.min(axis=0) > least[close]
    return usable


def _turns(element: ElementType, x: Array, y: Array) -> tuple[Array, Array]:
    """Cross product of the two sides at each corner, (corners, m), and the square of the longest
    side, (m,); both [L^2].
    """
    a, b = x[: element.corners], y[: element.corners]
    u, v = np.roll(a, -1, axis=0) - a, np.roll(b, -1, axis=0) - b
    before = np.roll(u, 1, axis=0), np.roll(v, 1, axis=0)
    return before[0] * v - before[1] * u, (u**2 + v**2).max(axis=0)


def _samples(element: ElementType, intervals: int) -> Array:
    """Natural points spread evenly over an element, corners included, and those at which the
    analysis will ask for det J, (q, 2).
    """
    i, j = np.divmod(np.arange((intervals + 1) ** 2), intervals + 1)
    points = np.stack((i, j), axis=1) / intervals
    points = points[i + j <= intervals] if element.is_triangle else 2 * points - 1
    rules = (element.stiffness_rule().points, element.load_rule().points)
    return np.unique(np.concatenate((points, *rules)), axis=0)


def _jacobian_determinants(element: ElementType, x: Array, y: Array, points: Array) -> Array:
    """det J at natural points (q, 2), of whatever sign, (q, m) [L^2]."""
    by_first, by_second = element.gradients(points).transpose(1, 0, 2)
    return (by_first @ x) * (by_second @ y) - (by_second @ x) * (by_first @ y)


def _mid_offsets(element: ElementType, x: Array, y: Array) -> Array:
    """Distance of each mid-side node from the middle of its side, over the side's length."""
    a, b, mid = (list(local) for local in zip(*element.sides, strict=True))
    length = np.hypot(x[b] - x[a], y[b] - y[a])
    offset = np.hypot(x[mid] - (x[a] + x[b]) / 2, y[mid] - (y[a] + y[b]) / 2)
    return offset / np.where(length > 0, length, 1)


# --- what to say ---------------------------------------------------------------------------------


def _describe(element: ElementType, coords: Array, numbers: NDArray) -> str:
    """Say what is wrong with the shape of one element; coords (n, 2), numbers (n,)."""
    corners = coords[: element.corners]
    what = f"{element.name} with corners {', '.join(str(n) for n in numbers[: element.corners])}"
    x, y = coords.T[..., None]
    turns, size = _turns(element, x, y)
    area = _polygon_area(corners)
    if abs(area) <= FLAT * size[0]:
        return f"{what} is flat: its area is {area:.3g}"
    if area < 0:
        return f"{what} is listed clockwise (area {area:.6g}); list the corners counter-clockwise"
    if element.order > 1 and _mid_offsets(element, x, y).max() > STRAIGHT:
        return f"{what} {_describe_fold(element, coords, numbers)}"
    turned = np.flatnonzero(turns[:, 0] <= FLAT * size[0])
    if len(turned) > 1:
        return (
            f"{what} crosses itself like a bow-tie; list the corners in order around the element, "
            "counter-clockwise"
        )
    return (
        f"{what} has an angle of 180 degrees or more at node {numbers[turned[0]]}, "
        f"{_at(corners[turned[0]])}; every corner angle must be below 180"
    )


def _describe_fold(element: ElementType, coords: Array, numbers: NDArray) -> str:
    x, y = coords.T[..., None]
    points = _samples(element, FINE)
    det_J = _jacobian_determinants(element, x, y, points)[:, 0]
    worst = int(det_J.argmin())
    place = element.shape_functions(points[[worst]])[0] @ coords
    a, b, mid = tuple(element.sides[int(_mid_offsets(element, x, y)[:, 0].argmax())])[:3]
    return (
        f"is folded near {_at(place)} (det J {det_J[worst]:.3g}): mid-side node {numbers[mid]} at "
        f"{_at(coords[mid])} is too far from the middle {_at((coords[a] + coords[b]) / 2)} between "
        f"nodes {numbers[a]} and {numbers[b]}"
    )


def _polygon_area(corners: Array) -> float:
    x, y = (corners - corners[0]).T
    return float((x * np.roll(y, -1) - np.roll(x, -1) * y).sum() / 2)


def _at(point: Array) -> str:
    return f"({point[0]:.6g}, {point[1]:.6g})"
