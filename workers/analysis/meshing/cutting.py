"""Edges cut near fine places, since the mesh library sees a size only at a thousandth of an edge.

The same cuts are made in the mesher's coordinates and in the drawing's own.
"""

from collections.abc import Iterator
from dataclasses import replace

import numpy as np
import shapely
from numpy.typing import NDArray

from workers.analysis.meshing.curves import Curve
from workers.analysis.meshing.drawing import Drawing, Edge
from workers.analysis.meshing.frame import rounded
from workers.analysis.meshing.sizing import Sizes

Array = NDArray[np.float64]

LONGEST = 250.0  # sizes that a piece of an edge may be long
NEAR = 4.0  # sizes from an edge within which a size point matters to it


def cut_edges(local: Drawing, whole: Drawing, sizes: Sizes) -> tuple[Drawing, Drawing, Sizes]:
    """Both drawings and the sizes with long edges in pieces where something fine is near."""
    cuts = _cuts(local, sizes)
    if not cuts:
        return local, whole, sizes
    inner = [e for k, edge in enumerate(local.edges) for e in _pieces(edge, cuts.get(k), True)]
    outer = [e for k, edge in enumerate(whole.edges) for e in _pieces(edge, cuts.get(k), False)]
    count = [1 + len(cuts.get(k, ())) for k in range(len(local.edges))]
    return (
        replace(local, edges=tuple(inner)),
        replace(whole, edges=tuple(outer)),
        sizes._replace(edges=np.repeat(sizes.edges, count)),
    )


def _cuts(drawing: Drawing, sizes: Sizes) -> dict[int, list[float]]:
    """Parameters at which edges are cut, by the number of the edge."""
    table, points = drawing.table, sizes.points
    points = points[points[:, 2] * LONGEST < table.lengths.max()]
    if not len(points):
        return {}
    reach = NEAR * points[:, 2]
    row, edge = shapely.STRtree(table.polylines()).query(
        shapely.points(points[:, :2]), predicate="dwithin", distance=reach + table.rise
    )
    places = table.nearest(edge, points[row, :2])
    t = np.clip(table.parameter(edge, places), 0.0, 1.0)
    distance = np.linalg.norm(places - points[row, :2], axis=1)
    fine = (distance <= reach[row]) & (table.lengths[edge] > LONGEST * points[row, 2])
    found: dict[int, list[float]] = {}
    for number in np.unique(edge[fine]):
        own = fine & (edge == number)
        length = float(table.lengths[number])
        found[int(number)] = list(_halved(0.0, 1.0, length, t[own], points[row[own], 2]))
    return found


def _halved(low: float, high: float, length: float, t: Array, size: Array) -> Iterator[float]:
    """Where to cut a stretch, in order, so that no piece is long against the sizes in it."""
    inside = (t >= low) & (t <= high)
    t, size = t[inside], size[inside]
    if not len(size) or (high - low) * length <= LONGEST * size.min():
        return
    middle = (low + high) / 2
    yield from _halved(low, middle, length, t, size)
    yield middle
    yield from _halved(middle, high, length, t, size)


def _pieces(edge: Edge, cuts: list[float] | None, is_local: bool) -> list[Edge]:
    if not cuts:
        return [edge]
    curve: Curve = edge.curve
    places = curve.at(np.array(cuts))
    if is_local:
        places = np.asarray(rounded(places))
    ends = [curve.start, *places, curve.end]
    t = [0.0, *cuts, 1.0]
    return [
        replace(edge, curve=curve.part(t[k], t[k + 1], ends[k], ends[k + 1]))
        for k in range(len(t) - 1)
    ]
