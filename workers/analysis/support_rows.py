"""What each support asks of each node: displacement along a direction = value.

A `normal` support takes the outward normal of the side at each node: that of its true curve where
the side is straight or an arc, so that it holds no tangential force and locks no rotation.
"""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, fields
from functools import partial

import numpy as np
from numpy.typing import NDArray

from workers.analysis.mesh import Facets, Mesh
from workers.analysis.selection import Selection, select
from workers.analysis.true_normals import true_normals
from workers.errors import Fault, MeshError
from workers.job import Support

Array = NDArray[np.float64]

NO_DIRECTION = 1e-3  # a mean normal shorter than this belongs to a knife edge, not to a side


@dataclass(frozen=True, eq=False)
class Rows:
    """Constraint rows: direction . displacement of node = value.

    node (r,), direction (r, 2) unit, value (r,) [L], case (r,) number of the only case in which
    the value acts or -1, support (r,) number in the job, blur (r,) angle by which the mesh leaves
    the direction open [rad].
    """

    node: NDArray[np.int64]
    direction: Array
    value: Array
    case: NDArray[np.int64]
    support: NDArray[np.int64]
    blur: Array

    @classmethod
    def uniform(
        cls, node: NDArray, direction: Array, blur: Array, *, value: float, case: int, support: int
    ) -> "Rows":
        count = len(node)
        return cls(
            node.astype(np.int64),
            np.ascontiguousarray(np.broadcast_to(direction, (count, 2)), float),
            np.full(count, float(value)),
            np.full(count, case),
            np.full(count, support),
            np.ascontiguousarray(np.broadcast_to(blur, count), float),
        )

    @classmethod
    def join(cls, rows: Sequence["Rows"]) -> "Rows":
        none = cls.uniform(
            np.empty(0, np.int64), np.zeros(2), np.zeros(1), value=0.0, case=-1, support=0
        )
        return cls(
            *(
                np.concatenate([getattr(part, f.name) for part in (none, *rows)])
                for f in fields(cls)
            )
        )

    def take(self, index: NDArray) -> "Rows":
        return Rows(*(getattr(self, f.name)[index] for f in fields(self)))


def support_rows(support: Support, number: int, case: int, mesh: Mesh) -> Iterator[Rows]:
    """Rows of one support; none if it is a spring only.

    Raises
    ------
    MeshError   the support catches nothing, or asks for a normal where there is no side.
    """
    selection = select(mesh, support.on, support.pointer)
    rows = partial(Rows.uniform, case=case, support=number)
    exact = np.zeros(1)
    for value, axis in ((support.ux, (1.0, 0.0)), (support.uy, (0.0, 1.0))):
        if value is not None:
            yield rows(selection.nodes, np.array(axis), exact, value=value)
    if support.normal is not None:
        nodes, normals, blur = side_normals(mesh, _facets(support, selection), support.pointer)
        yield rows(nodes, normals, blur, value=support.normal)
    if support.along is not None:
        along = np.asarray(support.along) / np.hypot(*support.along)
        yield rows(selection.nodes, along, exact, value=support.displacement or 0.0)


def _facets(support: Support, selection: Selection) -> Facets:
    if not len(selection.facets):
        raise MeshError(
            [
                Fault(
                    support.pointer,
                    "`normal` needs a side, and there is only a point here; use `along` with the "
                    "direction that is meant",
                )
            ]
        )
    return selection.facets


def side_normals(
    mesh: Mesh, facets: Facets, pointer: str
) -> tuple[NDArray[np.int64], Array, Array]:
    """Outward unit normal at every node of a side.

    Returns
    -------
    nodes (k,), normals (k, 2), blur (k,) : at the ends of a side that curves, the angle between
        the normals at the two ends of the last facet; 0 elsewhere [rad]
    """
    found, mean = true_normals(mesh, facets)
    nodes, length = found.astype(np.int64), np.linalg.norm(mean, axis=1)
    if (length < NO_DIRECTION).any():
        x, y = mesh.nodes[nodes[np.argmin(length)]]
        raise MeshError(
            [Fault(pointer, f"the side has no normal at ({x:g}, {y:g}): it folds back")]
        )
    normals = mean / length[:, None]
    return nodes, normals, _end_blur(mesh, facets, nodes, normals)


def _end_blur(mesh: Mesh, facets: Facets, nodes: NDArray, normals: Array) -> Array:
    """Turn of the normal along the last facet, at nodes where the side ends."""
    ends = np.searchsorted(nodes, mesh.facet_ends(facets))
    n, m = normals[ends[:, 0]], normals[ends[:, 1]]
    turn = np.abs(np.arctan2(n[:, 0] * m[:, 1] - n[:, 1] * m[:, 0], np.einsum("fi,fi->f", n, m)))
    is_end = np.bincount(ends.ravel(), minlength=len(nodes)) == 1
    blur = np.zeros(len(nodes))
    np.maximum.at(blur, ends.ravel(), np.repeat(turn, 2))
    return np.where(is_end, blur, 0.0)
