"""Named points inside the plate as short lines, since the mesh library forgets lone points.

A line runs from the point away from whatever is nearest, with the same domain on both sides.
"""

import numpy as np
import shapely
from numpy.typing import NDArray

from workers.analysis.meshing.curve_table import norm
from workers.analysis.meshing.curves import Line
from workers.analysis.meshing.drawing import Drawing, Edge
from workers.analysis.meshing.frame import rounded
from workers.analysis.meshing.sizing import Sizes

Array = NDArray[np.float64]

SHARE = 0.4  # of the distance to whatever is nearest: the length of the line


def embedded_lines(drawing: Drawing, sizes: Sizes) -> tuple[Edge, ...]:
    """Lines that make the inner points of a drawing in the mesher's coordinates vertices."""
    if not drawing.inner:
        return ()
    places = np.array([drawing.points[name] for name in drawing.inner])
    domains = np.array(list(drawing.inner.values()))
    longest = 2 * _sizes_at(places, sizes.domains[domains - 1], sizes)
    nearest = _nearest(drawing, places, longest / SHARE)
    away = places - nearest
    clearance = norm(away)
    lengths = np.minimum(longest, SHARE * clearance)
    ends = np.asarray(rounded(places + away * (lengths / clearance)[:, None]))
    unique = {tuple(place): k for k, place in reversed(list(enumerate(places.tolist())))}
    return tuple(
        Edge(Line(places[k], ends[k]), None, int(domains[k]), int(domains[k]))
        for k in sorted(unique.values())
    )


def _sizes_at(places: Array, general: Array, sizes: Sizes) -> Array:
    """The size wanted at each place, (k,), not more than the general one there."""
    wanted = general.copy()
    row, point = shapely.STRtree(shapely.points(sizes.points[:, :2])).query(
        shapely.points(places), predicate="dwithin", distance=general
    )
    away = norm(places[row] - sizes.points[point, :2])
    np.minimum.at(wanted, row, sizes.points[point, 2] + sizes.grading * away)
    return wanted


def _nearest(drawing: Drawing, places: Array, reach: Array) -> Array:
    """The nearest place on an edge or other point; one to the left if none is within reach."""
    nearest = places - np.stack((reach, np.zeros(len(reach))), axis=1)
    points = shapely.points(places)
    edge_tree = shapely.STRtree(drawing.table.polylines())
    row, edge = edge_tree.query(points, predicate="dwithin", distance=reach + drawing.table.rise)
    candidates = [(row, drawing.table.nearest(edge, places[row]))]
    row, other = shapely.STRtree(points).query(points, predicate="dwithin", distance=reach)
    apart = (places[row] != places[other]).any(axis=1)
    candidates.append((row[apart], places[other[apart]]))
    for row, found in candidates:
        distance = norm(found - places[row])
        order = np.argsort(distance)[::-1]  # the nearest is written last
        for k in order[distance[order] < reach[row[order]]]:
            if distance[k] < norm(nearest[row[k]] - places[row[k]]):
                nearest[row[k]] = found[k]
    return nearest
