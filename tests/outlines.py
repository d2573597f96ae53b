"""Jobs on outlines and own meshes, from the document on: meshed and solved as a worker does it.

Everything in N and mm. The oracles (hand sums, closed forms) stay with the tests.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
import orjson

from workers import pipeline
from workers.analysis.mesh import Mesh
from workers.analysis.recovery import Recovery
from workers.analysis.solution import Solution, solve
from workers.document.read import read_document
from workers.job import Job

ELEMENTS = ("T3", "T6", "Q4", "Q8")
STEEL = {
    "youngs_modulus": 210e3,
    "poissons_ratio": 0.3,
    "yield_strength": 355,
    "density": 7.85e-9,
    "thermal_expansion": 1.2e-5,
}
Json = dict[str, Any]


def document(
    geometry: Json,
    supports: Sequence[Json],
    loads: Sequence[Json] | Mapping[str, Sequence[Json]],
    *,
    element: str = "Q8",
    size: float | None = None,
    sizes: Mapping[str, float] | None = None,
    thickness: float = 1.0,
    materials: Mapping[str, Json] | None = None,
    **more: Any,
) -> Json:
    """A job document; loads of one case, or of several by name."""
    materials = materials or {"steel": STEEL}
    meshing = {"element": element, "size": size, "sizes": sizes and dict(sizes)}
    given = {key: value for key, value in meshing.items() if value is not None}
    return {
        "title": "Plate from an outline",
        "units": {"length": "mm", "force": "N"},
        "materials": dict(materials),
        "geometry": geometry,
        "plate": {"material": next(iter(materials)), "thickness": thickness},
        **({} if "mesh" in geometry else {"meshing": given}),
        "supports": list(supports),
        "load_cases": dict(loads) if isinstance(loads, Mapping) else {"load": list(loads)},
        **more,
    }


@dataclass(frozen=True, eq=False)
class Solved:
    """A solved job and what tests ask of it; of the first load case unless a case is named."""

    job: Job
    mesh: Mesh
    solution: Solution

    @property
    def displacement(self) -> np.ndarray:
        """(N, 2) of the first case."""
        return self.solution.displacement[..., 0]

    @cached_property
    def recovery(self) -> Recovery:
        return Recovery.build(self.solution.model)

    @cached_property
    def stress(self) -> np.ndarray:
        """Recovered stress at the field points, (P, 3, c)."""
        return self.recovery.nodal_stress(self.solution.displacement, self.solution.temperature)

    def at(self, *place: float, region: str | None = None) -> int:
        """The field point at a place where there is a node."""
        points = self.recovery.field_mesh.points
        distance = np.linalg.norm(points - np.array(place), axis=1)
        if region is not None:
            own = self.mesh.regions.index(region)
            distance[self.recovery.field_mesh.region != own] = np.inf
        assert distance.min() < 1e-8 * self.mesh.diagonal
        return int(distance.argmin())

    def node(self, *place: float) -> int:
        """The node at a place."""
        distance = np.linalg.norm(self.mesh.nodes - np.array(place), axis=1)
        assert distance.min() < 1e-8 * self.mesh.diagonal
        return int(distance.argmin())

    def nodes_of(self, side: str) -> np.ndarray:
        return self.mesh.facet_nodes(self.mesh.sides[side])

    def applied(self, about: Sequence[float] = (0.0, 0.0), case: int = 0) -> np.ndarray:
        """Force and moment of the nodal loads of a case, (3,)."""
        return resultant(self.mesh.nodes, self.solution.applied[..., case], about)

    def reaction(
        self, label: str, about: Sequence[float] = (0.0, 0.0), case: int = 0
    ) -> np.ndarray:
        """Force and moment of one support on the plate, (3,)."""
        found = next(s for s in self.solution.support_forces if s.label == label)
        return resultant(self.mesh.nodes[found.nodes], found.force[..., case], about)

    def reactions(self, about: Sequence[float] = (0.0, 0.0), case: int = 0) -> np.ndarray:
        """Of all supports together, (3,)."""
        labels = [support.label for support in self.solution.support_forces]
        return np.sum([self.reaction(label, about, case) for label in labels], axis=0)


def resultant(points: np.ndarray, force: np.ndarray, about: Sequence[float]) -> np.ndarray:
    """Force and moment of forces (k, 2) at points (k, 2), (3,)."""
    arm = points - np.array(about)
    moment = (arm[:, 0] * force[:, 1] - arm[:, 1] * force[:, 0]).sum()
    return np.array([*force.sum(axis=0), moment])


def solved(given: Json) -> Solved:
    """Read a document, mesh and solve it, through the same doors as a worker."""
    job = read_document(orjson.dumps(given, option=orjson.OPT_SERIALIZE_NUMPY))
    mesh = pipeline.prepare(job)
    return Solved(job, mesh, solve(job, mesh))


def laid(given: Json) -> tuple[Job, Mesh]:
    """Read and mesh only."""
    job = read_document(orjson.dumps(given, option=orjson.OPT_SERIALIZE_NUMPY))
    return job, pipeline.prepare(job)
