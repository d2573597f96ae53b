"""In which directions a support resists, node by node, as far as rigid motions are concerned.

Like the rows and springs of the analysis, but with the true normals of curved sides, so that a
roller on a circle is seen to let the plate turn.
"""

import numpy as np
from numpy.typing import NDArray

from workers.analysis.mesh import Mesh
from workers.analysis.selection import Selection
from workers.analysis.true_normals import true_normals
from workers.job import Spring, Support

Array = NDArray[np.float64]
Numbers = NDArray[np.intp]

NOTHING = Spring()


def held_directions(support: Support, selection: Selection, mesh: Mesh) -> tuple[Numbers, Array]:
    """Nodes (r,) and the direction (r, 2) in which each is held or sprung."""
    spring = support.spring or NOTHING
    fixed: list[tuple[float, float]] = []
    if support.ux is not None or spring.x > 0:
        fixed.append((1.0, 0.0))
    if support.uy is not None or spring.y > 0:
        fixed.append((0.0, 1.0))
    if support.along is not None:
        fixed.append(support.along)
    nodes = [np.repeat(selection.nodes.astype(np.intp), len(fixed))]
    directions = [np.tile(np.array(fixed, float).reshape(-1, 2), (len(selection.nodes), 1))]
    normal = support.normal is not None or spring.normal > 0
    if (normal or spring.tangential > 0) and len(selection.facets):
        on_side, outward = true_normals(mesh, selection.facets)
        outward /= np.linalg.norm(outward, axis=1, keepdims=True)
        tangent = np.column_stack((-outward[:, 1], outward[:, 0]))
        nodes += [on_side] * (normal + (spring.tangential > 0))
        directions += [outward] * normal + [tangent] * (spring.tangential > 0)
    return np.concatenate(nodes), np.concatenate(directions)
