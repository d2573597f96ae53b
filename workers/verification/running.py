"""Jobs of the reference cases, from their documents on: as a worker runs them, without files."""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property
from typing import Any

import numpy as np
import orjson
from numpy.typing import NDArray

from workers import pipeline
from workers.analysis.combine import load_states
from workers.analysis.mesh import Mesh
from workers.analysis.model import Model, build_model
from workers.analysis.recovery import Recovery, raw_stress
from workers.analysis.solution import Solution, solve
from workers.analysis.summary import summarise
from workers.document.read import read_document
from workers.job import Job

Array = NDArray[np.float64]
Json = dict[str, Any]

NEAR = 1e-9  # of the plate's diagonal: a node at a place is there


def document(
    geometry: Json,
    supports: Sequence[Json],
    loads: Mapping[str, Sequence[Json]] | Sequence[Json],
    *,
    units: tuple[str, str] = ("mm", "N"),
    youngs_modulus: float = 210e3,
    poissons_ratio: float = 0.3,
    thickness: float = 1.0,
    density: float = 7.85e-9,
    thermal_expansion: float = 1.2e-5,
    **more: Any,
) -> Json:
    """A job document of one material; loads of one case, or of several by name."""
    return {
        "title": "Verification",
        "units": {"length": units[0], "force": units[1]},
        "materials": {
            "material": {
                "youngs_modulus": youngs_modulus,
                "poissons_ratio": poissons_ratio,
                "density": density,
                "thermal_expansion": thermal_expansion,
            }
        },
        "geometry": geometry,
        "plate": {"material": "material", "thickness": thickness},
        "supports": list(supports),
        "load_cases": loads if isinstance(loads, Mapping) else {"load": list(loads)},
        **more,
    }


@dataclass(frozen=True, eq=False)
class Run:
    """A job that was read and meshed; solved when its numbers are asked for."""

    job: Job
    mesh: Mesh

    @cached_property
    def solution(self) -> Solution:
        return solve(self.job, self.mesh)

    @cached_property
    def model(self) -> Model:
        return build_model(self.job, self.mesh)

    @cached_property
    def recovery(self) -> Recovery:
        return Recovery.build(self.model)

    @cached_property
    def results(self) -> Json:
        return summarise(self.solution, self.recovery, load_states(self.job))

    @cached_property
    def stress(self) -> Array:
        """Recovered stress at the field points, (P, 3, c)."""
        return self.recovery.nodal_stress(self.solution.displacement, self.solution.temperature)

    @cached_property
    def raw_stress(self) -> Array:
        """The elements' own stress at their stiffness points, of all elements, (q, 3, c)."""
        parts = [
            raw_stress(
                self.model,
                number,
                block.element.stiffness_rule().points,
                self.solution.displacement,
                self.solution.temperature,
            )
            for number, block in enumerate(self.mesh.blocks)
        ]
        cases = len(self.solution.cases)
        return np.concatenate([part.reshape(-1, 3, cases) for part in parts])

    def node(self, x: float, y: float) -> int:
        """The node at a place.

        Raises
        ------
        LookupError   there is none.
        """
        distance = np.linalg.norm(self.mesh.nodes - [x, y], axis=1)
        if distance.min() > NEAR * self.mesh.diagonal:
            raise LookupError(f"no node at ({x:g}, {y:g})")
        return int(distance.argmin())

    def point(self, x: float, y: float) -> int:
        """The field point at a place of a plate of one region; LookupError if there is none."""
        return int(np.flatnonzero(self.recovery.field_mesh.origin == self.node(x, y))[0])

    def moved(self, side: str) -> Array:
        """Mean displacement of the nodes of a side, (2, c) [L]."""
        nodes = self.mesh.facet_nodes(self.mesh.sides[side])
        return np.asarray(self.solution.displacement[nodes].mean(axis=0))


def run(given: Json) -> Run:
    """Read and mesh a document."""
    job = read_document(orjson.dumps(given, option=orjson.OPT_SERIALIZE_NUMPY))
    return Run(job, pipeline.prepare(job))


def worst(values: Array, target: float) -> float:
    """The value that is furthest from a target."""
    return float(values.ravel()[np.abs(values - target).argmax()])
