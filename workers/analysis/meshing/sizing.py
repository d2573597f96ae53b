"""How fine the free mesh is where: the general size, arcs, narrow gaps, and what the job asks.

Sizes are those of the finished mesh. What the document gives by name (`sizes`) replaces the default
along that side; narrow gaps are always resolved, since the mesh library follows chords and would
cross itself where two sides come closer than a chord's rise.
"""

from collections.abc import Mapping
from typing import NamedTuple

import numpy as np
import shapely
from numpy.typing import NDArray

from workers.analysis.meshing.curves import Arc
from workers.analysis.meshing.drawing import Drawing
from workers.analysis.meshing.mesher import Sizes

Array = NDArray[np.float64]


class Fineness(NamedTuple):
    """Defaults for one order of element.

    elements : that the general size aims at over the plate's area
    per_turn : along a full circle
    per_gap : across a narrow gap
    """

    elements: int
    per_turn: int
    per_gap: int


# Quadratic elements follow an arc and a stress gradient with far fewer elements than linear ones.
DEFAULTS: Mapping[int, Fineness] = {1: Fineness(3000, 48, 4), 2: Fineness(800, 24, 2)}
FINEST = 2e-4  # of the diagonal: no automatic size goes below
POINTS_LIMIT = 200_000  # of gap samples; bounds the time
RINGS = 4  # around a named point inside the plate, where the size grows back
SAGITTA = 1e-4  # of an arc's radius: how closely polylines follow it for measuring gaps


def choose_sizes(
    drawing: Drawing,
    order: int,
    area: float,
    size: float | None,
    sizes: Mapping[str, float],
) -> Sizes:
    """Wanted sizes of a drawing [L].

    Parameters
    ----------
    order : of the element, 1 or 2
    area : of the plate [L^2]
    size : general size that the job asks for, None for the default [L]
    sizes : by name of a side, hole, region or point [L]
    """
    fineness = DEFAULTS[order]
    general = size or float(np.sqrt(area / fineness.elements))
    edges = np.array([_edge_size(edge.curve, general, fineness) for edge in drawing.edges])
    for number, edge in enumerate(drawing.edges):
        if edge.side is not None and edge.side in sizes:
            edges[number] = sizes[edge.side]
    points = [_gap_points(drawing, general, fineness.per_gap)]
    points += [
        _around(drawing.points[n], s, general) for n, s in sizes.items() if n in drawing.points
    ]
    return Sizes(general, edges, np.concatenate(points))


def _edge_size(curve: object, general: float, fineness: Fineness) -> float:
    if not isinstance(curve, Arc):
        return general
    return min(general, 2 * np.pi * curve.radius / fineness.per_turn)


def _around(place: tuple[float, float], size: float, general: float) -> Array:
    """Size points at a place and in rings about it; a lone point would not be followed."""
    rings = [np.array([[*place, size]])]
    radius = size
    for _ in range(RINGS):
        angles = np.arange(8) * np.pi / 4
        ring = np.asarray(place) + radius * np.stack((np.cos(angles), np.sin(angles)), axis=1)
        rings.append(np.column_stack((ring, np.full(8, min(size + 0.2 * radius, general)))))
        radius *= 2
    return np.concatenate(rings)


# --- gaps -------------------------------------------------------------------------------------


def _gap_points(drawing: Drawing, general: float, per_gap: int) -> Array:
    """Size points along every edge that comes near another that it does not touch, (k, 3).

    Each edge is sampled finer and finer where the gap is small against the sampling.
    """
    far = general * per_gap
    lines = _polylines(drawing)
    vertices = np.array([(edge.start, edge.end) for edge in drawing.edges]).reshape(-1, 2)
    ends = np.unique(vertices, axis=0, return_inverse=True)[1].reshape(-1, 2)
    tree = shapely.STRtree(lines)
    least = FINEST * float(np.linalg.norm(np.ptp(shapely.get_coordinates(lines), axis=0)))
    owner = np.arange(len(lines))
    low, high = np.zeros(len(lines)), np.ones(len(lines))
    lengths = np.array([edge.curve.length for edge in drawing.edges])
    found, count = [], 0
    while len(owner) and count < POINTS_LIMIT:
        middle = (low + high) / 2
        places = _places(drawing, owner, middle)
        gap = _gaps(tree, lines, ends, places, owner, far + (high - low) * lengths[owner])
        reach = (high - low) * lengths[owner]
        fine = (reach <= np.maximum(gap / per_gap, least)) & (gap < far)
        found.append(np.column_stack((places, gap / per_gap))[fine])
        count += int(fine.sum())
        # A stretch none of which comes near another edge needs no more samples.
        near = ~fine & (gap - reach / 2 < far) & (reach > least)
        owner, low, middle, high = owner[near], low[near], middle[near], high[near]
        owner = np.concatenate((owner, owner))
        low, high = np.concatenate((low, middle)), np.concatenate((middle, high))
    points = np.concatenate([np.empty((0, 3)), *found])
    points[:, 2] = np.maximum(points[:, 2], least)
    return points


def _places(drawing: Drawing, owner: NDArray[np.intp], parameter: Array) -> Array:
    places = np.empty((len(owner), 2))
    for number in np.unique(owner):
        rows = owner == number
        places[rows] = drawing.edges[number].curve.at(parameter[rows])
    return places


def _gaps(
    tree: shapely.STRtree,
    lines: NDArray,
    ends: NDArray,
    places: Array,
    owner: NDArray[np.intp],
    reach: Array,
) -> Array:
    """Distance of each place to the nearest edge that its own does not touch; inf beyond reach."""
    points = shapely.points(places)
    row, other = tree.query(points, predicate="dwithin", distance=reach)
    mine, theirs = ends[owner[row]], ends[other]
    touching = (mine[:, :, None] == theirs[:, None, :]).any(axis=(1, 2))
    row, other = row[~touching], other[~touching]
    gap = np.full(len(places), np.inf)
    np.minimum.at(gap, row, shapely.distance(points[row], lines[other]))
    return gap


def _polylines(drawing: Drawing) -> NDArray:
    lines = []
    for edge in drawing.edges:
        pieces = 1
        if isinstance(edge.curve, Arc):
            pieces = int(np.ceil(abs(edge.curve.sweep) / np.sqrt(8 * SAGITTA)))
        lines.append(shapely.LineString(edge.curve.at(np.linspace(0, 1, pieces + 1))))
    return np.array(lines)
