"""An area of the plate (all of it, a region, a box): loads that act in the volume."""

from collections.abc import Iterator
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from workers.analysis.assembly import CHUNK
from workers.analysis.model import Model
from workers.analysis.plane_stress import thermal_strain
from workers.errors import Fault, MeshError

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Area:
    """Some elements of a model, by block, and the unit nodal loads on them.

    Each unit load is formed when first asked for and then kept: hundreds of load cases share it.
    """

    model: Model
    elements: tuple[NDArray[np.intp], ...]

    @cached_property
    def nodes(self) -> NDArray[np.int64]:
        """Nodes of the elements, ascending."""
        used = np.zeros(self.model.mesh.node_count, dtype=bool)
        for block, chosen in zip(self.model.mesh.blocks, self.elements, strict=True):
            used[block.connectivity[chosen]] = True
        return np.flatnonzero(used)

    @cached_property
    def volume(self) -> Array:
        """Integral of N t dA at `nodes`, (k, 1) [L^3]."""
        return self._integrate(with_density=False)[:, :1]

    @cached_property
    def mass(self) -> Array:
        """Integrals of N rho t (1, x, y) dA at `nodes`, (k, 3) [F s^2/L], [F s^2]."""
        return self._integrate(with_density=True)

    @cached_property
    def heating(self) -> Array:
        """Nodal forces of a temperature change of one, at `nodes`, (k, 2) [F/K]."""
        total = np.zeros((self.model.mesh.node_count, 2))
        for number, chosen in self._chunks():
            block, section = self.model.mesh.blocks[number], self.model.sections[number]
            nodes = block.connectivity[chosen]
            points, _ = block.element.stiffness_rule()
            strain = thermal_strain(section.thermal_expansion[chosen], 1.0)
            force = block.element.initial_strain_load(
                self.model.mesh.nodes[nodes],
                section.constitutive[chosen],
                section.thickness[chosen],
                np.repeat(strain[:, None], len(points), axis=1),
            )
            _add_at(total, nodes, force)
        return total[self.nodes]

    def lacking(self, name: str) -> list[str]:
        """Regions of these elements whose material does not state a property."""
        found: set[str] = set()
        for number, chosen in enumerate(self.elements):
            missing = np.isnan(getattr(self.model.sections[number], name)[chosen])
            regions = self.model.mesh.blocks[number].region[chosen][missing]
            found |= {self.model.mesh.regions[r] for r in np.unique(regions)}
        return sorted(found)

    def require(self, name: str, words: str, pointer: str) -> None:
        """Raise MeshError where the material of an element lacks a property."""
        if regions := self.lacking(name):
            materials = sorted({self.model.job.material_of(region).name for region in regions})
            listed = ", ".join(repr(material) for material in materials)
            message = f"this load needs the {words} of material {listed}; give `{name}` there"
            raise MeshError([Fault(pointer, message)])

    def _integrate(self, *, with_density: bool) -> Array:
        """Integrals of N t (1, x, y) dA, times the density or not, (k, 3)."""
        total = np.zeros((self.model.mesh.node_count, 4))
        for number, chosen in self._chunks():
            block, section = self.model.mesh.blocks[number], self.model.sections[number]
            nodes = block.connectivity[chosen]
            coords = self.model.mesh.nodes[nodes]
            points, _ = block.element.load_rule()
            position = np.matmul(block.element.shape_functions(points), coords)
            one = np.ones_like(position)
            factor = section.density[chosen] if with_density else np.ones(len(nodes))
            scale = factor[:, None, None]
            thickness = section.thickness[chosen]
            for first, field in ((0, one), (2, position)):
                force = block.element.body_load(coords, thickness, scale * field)
                _add_at(total[:, first : first + 2], nodes, force)
        return total[self.nodes][:, [0, 2, 3]]

    def _chunks(self) -> Iterator[tuple[int, NDArray[np.intp]]]:
        for number, chosen in enumerate(self.elements):
            for start in range(0, len(chosen), CHUNK):
                yield number, chosen[start : start + CHUNK]


def _add_at(total: Array, nodes: NDArray, force: Array) -> None:
    """Add (m, n, 2) element forces to (N, 2) nodal forces."""
    # Counting would go through all nodes of the mesh for each chunk of elements.
    for axis in (0, 1):
        np.add.at(total[:, axis], nodes.ravel(), force[..., axis].ravel())
