"""What each support asks of each node: displacement along a direction = value.

A `normal` support takes the outward normal of the side at each node: that of its true curve where
the side is straight or an arc, so that it holds no tangential force and locks no rotation. Where
the side has a corner, it holds along the normals of both legs.
"""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, fields
from functools import partial

import numpy as np
from numpy.typing import NDArray

from workers.analysis.mesh import Facets, Mesh
from workers.analysis.selection import Selection
from workers.analysis.true_normals import facet_normals, node_normals
from workers.errors import Fault, MeshError
from workers.job import Support

Array = NDArray[np.float64]
ALL = -1  # case number of a value that belongs to every case


@dataclass(frozen=True, eq=False)
class Rows:
    """Constraint rows: direction . displacement of node = value.

    node (r,), direction (r, 2) unit, value (r,) [L], case (r,) number of the only case in which
    the value acts or ALL, support (r,) number in the job, blur (r,) angle by which the mesh leaves
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
            np.empty(0, np.int64), np.zeros(2), np.zeros(1), value=0.0, case=ALL, support=0
        )
        return cls(
            *(
                np.concatenate([getattr(part, f.name) for part in (none, *rows)])
                for f in fields(cls)
            )
        )

    def take(self, index: NDArray) -> "Rows":
        return Rows(*(getattr(self, f.name)[index] for f in fields(self)))


def support_rows(
    support: Support, selection: Selection, mesh: Mesh, number: int, case: int
) -> Iterator[Rows]:
    """Rows of one support on what it caught; none if it is a spring only.

    Raises
    ------
    MeshError   the support asks for a normal where there is no side.
    """
    rows = partial(Rows.uniform, case=case, support=number)
    exact = np.zeros(1)
    for value, axis in ((support.ux, (1.0, 0.0)), (support.uy, (0.0, 1.0))):
        if value is not None:
            yield rows(selection.nodes, np.array(axis), exact, value=value)
    if support.normal is not None:
        nodes, normals, blur = side_normals(mesh, _facets(support, selection))
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


def side_normals(mesh: Mesh, facets: Facets) -> tuple[NDArray[np.int64], Array, Array]:
    """Outward unit normals at the nodes of a side.

    Returns
    -------
    nodes (r,), normals (r, 2), blur (r,) : a node at a corner stands several times; blur is how
        far the normal may be off at the ends of a side that is no arc, 0 elsewhere [rad]
    """
    found, normals = node_normals(mesh, facets)
    nodes = found.astype(np.int64)
    return nodes, normals, _end_blur(mesh, facets)[nodes]


def _end_blur(mesh: Mesh, facets: Facets) -> Array:
    """By node of the mesh: change of curvature over the last facet, times its length."""
    n, m = np.moveaxis(facet_normals(mesh, facets)[:, :2], 1, 0)
    turn = np.arctan2(n[:, 0] * m[:, 1] - n[:, 1] * m[:, 0], np.einsum("fi,fi->f", n, m))
    length = mesh.facet_lengths(facets)
    ends, curvature = mesh.facet_ends(facets), np.repeat(turn / length, 2)
    count = np.bincount(ends.ravel(), minlength=mesh.node_count)
    total = np.bincount(ends.ravel(), curvature, minlength=mesh.node_count)
    last, inner = ends.ravel(), ends[:, ::-1].ravel()
    next_one = np.where(count[inner] == 2, total[inner] - curvature, curvature)
    change = np.abs(curvature - next_one) * np.repeat(length, 2)
    blur = np.zeros(mesh.node_count)
    np.maximum.at(blur, last, np.where(count[last] == 1, change, 0.0))
    return blur
