"""What must be true of any mesh that leaves the mesher: nothing lost, nothing doubled, no gaps.

The library has been seen to lose area and to cross its own boundary without a word.
"""

import numpy as np
from numpy.typing import NDArray

from workers.analysis.meshing.curve_table import cross
from workers.analysis.meshing.drawing import OUTSIDE, Drawing
from workers.analysis.meshing.flat_mesh import FlatMesh, cell_edges, side_keys

Array = NDArray[np.float64]

ROUNDING = 1e-9  # of the diagonal squared: areas that differ by less are equal


def flaws(mesh: FlatMesh, drawing: Drawing) -> list[str]:
    """What is wrong with a mesh of a drawing in the mesher's coordinates; [] if nothing is."""
    found = []
    areas = [_areas(mesh.nodes[cells]) for cells in mesh.cells]
    inverted = sum(int((area <= 0).sum()) for area in areas)
    if inverted:
        found.append(f"{inverted} elements are inverted")
    used = np.zeros(len(mesh.nodes), bool)
    for cells in mesh.cells:
        used[cells] = True
    if not used.all():
        found.append(f"{int((~used).sum())} nodes belong to no element")
    return found + _border_flaws(mesh, drawing) + _area_flaws(mesh, drawing, areas)


def _areas(corners: Array) -> Array:
    return np.asarray(cross(corners, np.roll(corners, -1, axis=1)).sum(axis=1) / 2)


def _border_flaws(mesh: FlatMesh, drawing: Drawing) -> list[str]:
    """Every side has an element of the right domain on each side of it, and only those."""
    sides = np.concatenate([cell_edges(cells).reshape(-1, 2) for cells in mesh.cells])
    domains = np.concatenate(
        [
            np.repeat(domain, cells.shape[1])
            for cells, domain in zip(
                mesh.cells, (mesh.triangle_domain, mesh.quadrilateral_domain), strict=True
            )
        ]
    )
    left = np.array([edge.left for edge in drawing.edges])[mesh.segment_edge]
    right = np.array([edge.right for edge in drawing.edges])[mesh.segment_edge]
    along = mesh.segments.astype(np.int64)
    # What stands on the border from outside: the side as seen from the other domain.
    wanted = np.concatenate((along[left != OUTSIDE], along[right != OUTSIDE][:, ::-1]))
    of = np.concatenate((left[left != OUTSIDE], right[right != OUTSIDE]))
    directed, inverse = np.unique(
        np.concatenate((_directed(sides), _directed(wanted))), return_inverse=True
    )
    owner = np.full(len(directed), OUTSIDE)
    count = np.bincount(inverse[: len(sides)], minlength=len(directed))
    owner[inverse[: len(sides)]] = domains
    if (count > 1).any():
        return ["elements overlap"]
    if (owner[inverse[len(sides) :]] != of).any():
        return ["the border of the plate or of a region is not followed"]
    once = np.unique(side_keys(sides), return_counts=True)
    lone = once[0][once[1] == 1]
    if len(np.setdiff1d(lone, side_keys(along[(left == OUTSIDE) | (right == OUTSIDE)]))):
        return ["there is a gap between elements"]
    return []


def _directed(sides: NDArray[np.int64]) -> NDArray[np.int64]:
    return np.asarray((sides[:, 0] << 32) | sides[:, 1])


def _area_flaws(mesh: FlatMesh, drawing: Drawing, areas: list[Array]) -> list[str]:
    """Each domain's elements have the area of the polygon that its border nodes make."""
    count = len(drawing.regions) + 1
    found = sum(
        np.bincount(domain, area, minlength=count)
        for domain, area in zip(
            (mesh.triangle_domain, mesh.quadrilateral_domain), areas, strict=True
        )
    )
    swept = cross(mesh.nodes[mesh.segments[:, 0]], mesh.nodes[mesh.segments[:, 1]]) / 2
    expected = np.zeros(count)
    for side, sign in (("left", 1.0), ("right", -1.0)):
        domain = np.array([getattr(edge, side) for edge in drawing.edges])[mesh.segment_edge]
        expected += np.bincount(domain, sign * swept, minlength=count)
    wrong = np.abs(found - expected)[1:] > ROUNDING
    return [
        f"region {name!r} has an area that is not its own"
        for name, bad in zip(drawing.regions, wrong, strict=True)
        if bad
    ]
