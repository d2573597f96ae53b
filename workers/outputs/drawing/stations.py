"""Places along the sides of the plate at which signs are drawn."""

from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
from numpy.typing import NDArray

from workers.analysis.mesh import BrokenChainError, Facets, Mesh
from workers.analysis.selection import Selection
from workers.outputs.drawing.tessellation import facet_curves, loops
from workers.outputs.drawing.view import View

Array = NDArray[np.floating[Any]]

LEAST_TURN = 1.0  # radians that a side must turn to count as an arc
MOST_POINTS = 12  # signs for a set of single nodes; more would be a blot


@dataclass(frozen=True, eq=False)
class Run:
    """A side of the plate as a polyline in pixels, material on the left.

    points (n, 2); outward (n, 2) unit normals away from the material; at (n,) distance along the
    run [pixels]
    """

    points: Array
    outward: Array
    at: Array
    closed: bool

    @property
    def length(self) -> float:
        return float(self.at[-1])

    def stations(self, spacing: float, *, ends: bool = False) -> tuple[Array, Array, Array]:
        """Evenly spaced places: points (k, 2), outward (k, 2), part of the length (k,).

        With `ends` the first and last station are the ends of an open run.
        """
        count = max(1, round(self.length / spacing))
        if ends and not self.closed:
            part = np.linspace(0.0, 1.0, max(2, count + 1))
        else:
            part = (np.arange(count) + 0.5) / count
        points = np.column_stack([np.interp(part * self.length, self.at, c) for c in self.points.T])
        outward = np.column_stack(
            [np.interp(part * self.length, self.at, c) for c in self.outward.T]
        )
        return points, outward / np.linalg.norm(outward, axis=1)[:, None], part

    @cached_property
    def radius(self) -> float:
        """Of the arc that it makes around what is outside, as in a hole; else infinite."""
        inner = np.linalg.norm(np.diff(self.points + self.outward, axis=0), axis=1).sum()
        turned = self.length - float(inner)  # radians, by the shrinking over one pixel
        return self.length / turned if turned > LEAST_TURN else float("inf")

    @property
    def centre(self) -> Array:
        """Of that arc."""
        return np.asarray((self.points + self.radius * self.outward).mean(axis=0))

    @property
    def middle(self) -> Array:
        return np.array([np.interp(self.length / 2, self.at, c) for c in self.points.T])


def runs(mesh: Mesh, facets: Facets, view: View) -> list[Run]:
    """The facets as runs; a side that is one chain starts where the chain does."""
    if not len(facets):
        return []
    curves = view.pixels(facet_curves(mesh, facets, mesh.nodes))
    ends = mesh.facet_ends(facets)
    return [
        _run(curves[order], bool(ends[order[0], 0] == ends[order[-1], 1]))
        for order in _orders(mesh, facets)
    ]


def _orders(mesh: Mesh, facets: Facets) -> list[NDArray[np.intp]]:
    try:
        start, _ = mesh.chain(facets)
    except BrokenChainError:
        return loops(mesh, facets)
    return [np.argsort(start)]


def _run(curves: Array, closed: bool) -> Run:
    """Normals are those of the pieces, so that a corner between two sides stays a corner."""
    points = np.vstack((curves[:, :-1].reshape(-1, 2), curves[-1, -1:]))
    step = np.diff(points, axis=0)
    length = np.linalg.norm(step, axis=1)
    normal = np.column_stack((step[:, 1], -step[:, 0])) / length[:, None]
    at = np.concatenate(([0.0], np.cumsum(length)))
    before, after = np.vstack((normal[:1], normal)), np.vstack((normal, normal[-1:]))
    outward = before + after
    return Run(points, outward / np.linalg.norm(outward, axis=1)[:, None], at, closed)


def lone_nodes(mesh: Mesh, selection: Selection) -> NDArray[np.int32]:
    """Nodes of a selection that lie on none of its facets, thinned to a drawable number."""
    if selection.element_count and len(selection.facets):
        return np.empty(0, np.int32)
    lone = np.setdiff1d(selection.nodes, mesh.facet_nodes(selection.facets))
    if len(lone) <= MOST_POINTS:
        return lone
    return lone[np.linspace(0, len(lone) - 1, MOST_POINTS).round().astype(int)]


def outward_at(mesh: Mesh, node: int) -> Array | None:
    """Direction away from the material at a node of the boundary; None inside the plate."""
    ends = mesh.facet_ends(mesh.boundary)
    touching = (ends == node).any(axis=1)
    step = np.diff(mesh.nodes[ends[touching]], axis=1)[:, 0]
    if not len(step):
        return None
    normal = np.column_stack((step[:, 1], -step[:, 0]))
    total = (normal / np.linalg.norm(normal, axis=1)[:, None]).sum(axis=0)
    size = float(np.linalg.norm(total))
    return total / size if size > 1e-9 else None
