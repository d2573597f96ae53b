"""Whether a mesh is good enough, and if not, where it must be finer.

Looks at elements as they will be: with mid-side nodes on the arcs when the type has them.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from elements import registry
from elements.contract import ElementType
from workers.analysis.meshing.corners import Corner, sharp_corners
from workers.analysis.meshing.curve_table import CurveTable
from workers.analysis.meshing.drawing import Drawing
from workers.analysis.meshing.flat_mesh import FlatMesh, cell_edges, side_keys
from workers.analysis.meshing.shape import shape_faults
from workers.analysis.meshing.smooth import QUALITY
from workers.analysis.quality import aspect_ratio, element_quality

Array = NDArray[np.float64]

# The element that fills in where a quadrilateral would be too poor.
TRIANGLE_LIKE = {1: "T3", 2: "T6"}
LEAST = {3: 0.42, 4: 0.3}  # scaled Jacobian by corners: below it is poor; 0.4 is 20 degrees
# Aspect of quadrilaterals: above it is poor. The library's rows run together or apart here and
# there, with elements of 10 and more; pairs of triangles are below 2 but in tight corners.
MOST_ASPECT = 3.5
SHARP = 50.0  # degrees: elements near a corner of the drawing so sharp are excused


@dataclass(frozen=True, eq=False)
class Verdict:
    """worst : the quality over what is wanted, least of all elements; below 0 inverted.
    poor : (k, 3) centres and sizes of the elements below 1 that no corner of the drawing excuses.
    """

    worst: float
    poor: Array

    @property
    def is_sound(self) -> bool:
        return self.worst > 0


def judge(mesh: FlatMesh, drawing: Drawing, element: ElementType) -> Verdict:
    """How good the mesh is as elements of that type (and the triangle like it)."""
    sharp = sharp_corners(drawing.edges, SHARP)
    worst, poor = np.inf, [np.empty((0, 3))]
    kinds = (registry.get(TRIANGLE_LIKE[element.order]), element)
    if element.is_triangle:
        kinds = (element, element)
    for cells, kind, quality_of in zip(mesh.cells, kinds, QUALITY, strict=True):
        if not len(cells):
            continue
        corners = mesh.nodes[cells]
        quality = quality_of(corners)
        if kind.order > 1:
            curved, with_arcs = _curved_quality(mesh, drawing, cells, kind)
            quality[curved] = np.minimum(quality[curved], with_arcs)
        share = quality / LEAST[kind.corners]
        if not kind.is_triangle:
            share = np.minimum(share, MOST_ASPECT / aspect_ratio(corners))
        rows = np.flatnonzero(share < 1)
        sides = np.linalg.norm(np.roll(corners[rows], -1, axis=1) - corners[rows], axis=2)
        places = np.column_stack((corners[rows].mean(axis=1), sides.mean(axis=1)))
        excused = _excused(places, sharp) & (share[rows] > 0)
        share[rows[excused]] = np.inf
        worst = min(worst, float(share.min()))
        poor.append(places[~excused])
    return Verdict(worst, np.concatenate(poor))


def _excused(places: Array, sharp: list[Corner]) -> NDArray[np.bool_]:
    """Which elements are in a sharp corner, where it is no wider than two of them."""
    excused = np.zeros(len(places), bool)
    for corner in sharp:
        reach = places[:, 2] / np.tan(np.radians(corner.degrees) / 2)
        excused |= np.linalg.norm(places[:, :2] - corner.at, axis=1) < reach
    return excused


def _curved_quality(
    mesh: FlatMesh, drawing: Drawing, cells: NDArray[np.int32], element: ElementType
) -> tuple[NDArray[np.intp], Array]:
    """Cells with a side on an arc, and their scaled Jacobian as curved elements; -1 if folded."""
    table: CurveTable = drawing.table
    on_arc = table.is_arc[mesh.segment_edge]
    keys = side_keys(mesh.segments[on_arc].astype(np.int64))
    order = np.argsort(keys)
    sides = side_keys(cell_edges(cells))
    at = np.minimum(np.searchsorted(keys[order], sides), max(len(keys) - 1, 0))
    hit = keys[order][at] == sides if len(keys) else np.zeros(sides.shape, bool)
    rows = np.flatnonzero(hit.any(axis=1))
    corners = mesh.nodes[cells[rows]]
    middles = (corners + np.roll(corners, -1, axis=1)) / 2
    curve = mesh.segment_edge[on_arc][order[at[rows]]]
    middles[hit[rows]] = table.project(curve[hit[rows]], middles[hit[rows]])
    coords = np.concatenate((corners, middles), axis=1)
    quality = element_quality(element, coords)["min_scaled_jacobian"]
    numbers = np.arange(coords.shape[0] * coords.shape[1]).reshape(coords.shape[:2])
    folded = [f.element for f in shape_faults(element, numbers, coords.reshape(-1, 2))]
    quality[folded] = -1.0
    return rows, quality
