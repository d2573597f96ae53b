"""Finer meshes of a job: of an outline by a field of sizes, of patches by their divisions.

Patches are joined along whole sides, so that a side's divisions are those of every patch that it
runs through. Each such strip has a whole multiple of the divisions that the document gives: what
was a node stays one, and the mesh stays conforming.
"""

from collections import defaultdict
from dataclasses import replace
from functools import partial
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

from elements.registry import get
from workers.analysis.connected import label_components
from workers.analysis.mesh import Mesh
from workers.analysis.meshing.drawing import Drawing
from workers.analysis.meshing.free import mesh_drawing
from workers.analysis.meshing.outline import draw
from workers.analysis.meshing.patches import mesh_patches
from workers.analysis.meshing.plan import Plan
from workers.analysis.meshing.size_field import element_sizes, follow, rings, size_points
from workers.analysis.nearby import close_pairs
from workers.analysis.selection import TOLERANCE
from workers.geometry import OutlineGeometry, PatchGeometry
from workers.job import Job, Meshing

Array = NDArray[np.float64]

# An adaptive run that is not told a size starts with elements so much larger than usual.
COARSER = {1: 3.0, 2: 4.0}  # by order
# Sizes of the meshes of a convergence record over that of the job's own mesh.
FREE_SERIES = (1.0, 0.7, 0.5)
PATCH_SERIES = (1, 2, 3)
ENOUGH = 0.1  # of a division: so little is not worth another one
MOST_MULTIPLE = 4  # of a strip's divisions in one step


class Refiner(Protocol):
    """Makes the meshes of one job."""

    def first(self) -> Mesh:
        """The mesh that an adaptive run starts from."""

    def finer(self, mesh: Mesh, ratios: Array, corners: Array) -> Mesh:
        """The next mesh.

        ratios : (m,) new over old size of all elements of the last
        corners : (s, 3) x, y and size wanted at singular places [L]
        """

    def series(self, number: int) -> Mesh:
        """Meshes 0, 1 and 2 of a convergence record, each finer everywhere."""


def refiner(job: Job) -> Refiner:
    """The refiner for the geometry of a job.

    Raises
    ------
    TypeError   a finished mesh cannot be refined (the document layer refuses such a job).
    """
    if isinstance(job.geometry, OutlineGeometry):
        return OutlineRefiner(draw(job.geometry), job.meshing)
    if isinstance(job.geometry, PatchGeometry):
        return PatchRefiner(job.geometry, job.meshing)
    raise TypeError(f"a {type(job.geometry).__name__} cannot be refined")


class OutlineRefiner:
    """Sizes that the document gives are upper limits throughout."""

    def __init__(self, drawing: Drawing, meshing: Meshing) -> None:
        self._drawing = drawing
        self._meshing = meshing
        order = get(meshing.element).order
        self._start = 1.0 if meshing.size is not None or meshing.sizes else COARSER[order]

    def first(self) -> Mesh:
        # From the start as free to grow as later on, so that details do not cost the surroundings.
        return self._mesh(self._start, np.empty((0, 3)))

    def finer(self, mesh: Mesh, ratios: Array, corners: Array) -> Mesh:
        sizes = element_sizes(mesh) * ratios
        about = [rings(corner, float(sizes.max())) for corner in corners]
        points = np.concatenate((size_points(mesh, sizes), *about))
        elements = float((1 / ratios**2).sum())
        return self._mesh(self._start, points, elements)

    def series(self, number: int) -> Mesh:
        return self._mesh(FREE_SERIES[number])

    def _mesh(self, scale: float, points: Array | None = None, elements: float = 0.0) -> Mesh:
        return mesh_drawing(
            self._drawing,
            self._meshing,
            partial(_revised, scale=scale, points=points, elements=elements),
        )


def _revised(plan: Plan, scale: float, points: Array | None, elements: float) -> Plan:
    sizes = plan.sizes.scaled(scale)
    plan = plan._replace(sizes=sizes, elements=plan.elements / scale**2)
    return plan if points is None else follow(plan, points, max(elements, plan.elements))


class PatchRefiner:
    """Whole multiples of the divisions, strip by strip."""

    def __init__(self, geometry: PatchGeometry, meshing: Meshing) -> None:
        self._geometry = geometry
        self._element = get(meshing.element)
        self._strips = _strips(geometry)
        self._multiples = np.ones(self._strips.max() + 1, np.int64)

    def first(self) -> Mesh:
        return self._mesh(self._multiples)

    def finer(self, mesh: Mesh, ratios: Array, corners: Array) -> Mesh:
        """Every strip as fine as the patch on it that needs most."""
        wanted = np.zeros(len(self._multiples))
        for strips, own in zip(self._strips, self._by_patch(ratios), strict=True):
            # As many elements as all those of the patch ask for together.
            np.maximum.at(wanted, strips, np.sqrt((1 / own**2).mean()))
        exact = self._multiples * np.clip(wanted, 1.0, MOST_MULTIPLE)
        finer = np.ceil(exact - ENOUGH * self._multiples).astype(np.int64)
        if (finer <= self._multiples).all():
            finer[wanted == wanted.max()] += 1
        self._multiples = np.maximum(self._multiples, finer)
        return self._mesh(self._multiples)

    def series(self, number: int) -> Mesh:
        return self._mesh(np.full(len(self._multiples), PATCH_SERIES[number]))

    def _by_patch(self, values: Array) -> list[Array]:
        per_cell = 2 if self._element.is_triangle else 1
        multiples = self._multiples[self._strips]
        divisions = np.array([patch.divisions for patch in self._geometry.patches]) * multiples
        return np.split(values, np.cumsum(per_cell * divisions.prod(axis=1))[:-1])

    def _mesh(self, multiples: NDArray[np.int64]) -> Mesh:
        patches = []
        for patch, strips in zip(self._geometry.patches, self._strips, strict=True):
            m, n = (patch.divisions * multiples[strips]).tolist()
            patches.append(replace(patch, divisions=(m, n)))
        return mesh_patches(replace(self._geometry, patches=tuple(patches)), self._element)


def _strips(geometry: PatchGeometry) -> NDArray[np.int32]:
    """Which strip the first and the second divisions of each patch belong to, (patches, 2)."""
    corners = np.array([patch.corners for patch in geometry.patches], float).reshape(-1, 2)
    same = close_pairs(corners, TOLERANCE * float(np.linalg.norm(np.ptp(corners, axis=0))))
    vertices = label_components(len(corners), same[:, 0], same[:, 1]).reshape(-1, 4)
    between: dict[tuple[int, int], list[int]] = defaultdict(list)
    for patch, own in enumerate(vertices.tolist()):
        for side in range(4):
            a, b = own[side], own[(side + 1) % 4]
            between[min(a, b), max(a, b)].append(2 * patch + side % 2)
    shared = [pair for pair in between.values() if len(pair) == 2]
    first, second = np.array(shared, np.int32).reshape(-1, 2).T
    return label_components(2 * len(vertices), first, second).reshape(-1, 2)
