"""The model: a job on a mesh, with the section of every element looked up once.

Regions give thickness and material by name; from here on they are plain arrays by element.
"""

from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from workers.analysis.mesh import Mesh
from workers.analysis.plane_stress import constitutive
from workers.job import Job

Array = NDArray[np.float64]

ELEMENTS_AT_ONCE = 1024  # their Jacobians stay in the cache


@dataclass(frozen=True, eq=False)
class Sections:
    """Thickness and material of the elements of one block; nan where the job does not say.

    thickness (m,) [L]; youngs_modulus (m,) [F/L^2]; poissons_ratio (m,); density (m,)
    [F s^2/L^4] or nan; thermal_expansion (m,) [1/K] or nan; constitutive (m, 3, 3) [F/L^2].
    """

    thickness: Array
    youngs_modulus: Array
    poissons_ratio: Array
    density: Array
    thermal_expansion: Array
    constitutive: Array


@dataclass(frozen=True, eq=False)
class Model:
    """A job, its mesh, and one `Sections` for each block of the mesh."""

    job: Job
    mesh: Mesh
    sections: tuple[Sections, ...]

    @cached_property
    def volumes(self) -> tuple[Array, ...]:
        """Area times thickness of the elements, for each block (m,) [L^3]."""
        return tuple(map(self._volumes, range(len(self.sections))))

    def _volumes(self, number: int) -> Array:
        block = self.mesh.blocks[number]
        points, weights = block.element.load_rule()
        areas = np.empty(block.element_count)
        for start in range(0, len(areas), ELEMENTS_AT_ONCE):
            chunk = slice(start, start + ELEMENTS_AT_ONCE)
            coords = self.mesh.nodes[block.connectivity[chunk]]
            _, det_J = block.element.jacobian(coords, points)
            areas[chunk] = det_J @ weights
        return areas * self.sections[number].thickness


def build_model(job: Job, mesh: Mesh) -> Model:
    """Look up the section of every element.

    Raises
    ------
    KeyError   a region names a material that the job does not have (the document layer
        refuses such a job).
    """
    by_region = np.array(
        [_section_row(job, region) for region in mesh.regions], dtype=np.float64
    ).reshape(-1, 5)
    return Model(job, mesh, tuple(_sections(by_region[block.region]) for block in mesh.blocks))


def _section_row(job: Job, region: str) -> tuple[float, float, float, float, float]:
    material = job.material_of(region)
    return (
        job.thickness_of(region),
        material.youngs_modulus,
        material.poissons_ratio,
        np.nan if material.density is None else material.density,
        np.nan if material.thermal_expansion is None else material.thermal_expansion,
    )


def _sections(rows: Array) -> Sections:
    thickness, youngs_modulus, poissons_ratio, density, expansion = np.ascontiguousarray(rows.T)
    law = constitutive(youngs_modulus, poissons_ratio)
    return Sections(thickness, youngs_modulus, poissons_ratio, density, expansion, law)
