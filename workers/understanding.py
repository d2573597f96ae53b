"""What a job was understood to say, put on its mesh and added up; nothing is solved.

Here is what the loads come to and what the supports hold, so that a person can see a slip before
hundreds of cases are computed.
"""

from collections.abc import Callable
from dataclasses import dataclass
from typing import Any, TypeVar

import numpy as np
from numpy.typing import NDArray

from workers.analysis.combine import load_states
from workers.analysis.loads.cases import Loads, resolve_loads
from workers.analysis.mesh import Mesh
from workers.analysis.model import Model, build_model
from workers.analysis.resultants import centroid, resultant
from workers.analysis.selection import Finder
from workers.analysis.supports import resolve_supports
from workers.document.units import Dimension, to_number
from workers.errors import Fault, FaultyError, MeshError
from workers.job import Job, Support
from workers.outputs.wording import load_words, support_words, target_words
from workers.preflight import placing_faults

Array = NDArray[np.float64]
Json = dict[str, Any]
T = TypeVar("T")

AT_ONCE = 1 << 26  # bytes of nodal forces that are written out at a time
ROUNDING = 1e-12  # of what was added up; a sum below is shown as zero
MASS = Dimension("a mass", (-1, 1, 2, 0), "1 kg")


@dataclass(frozen=True, eq=False)
class Understood:
    """A job on its mesh, without fault, and its loads."""

    model: Model
    loads: Loads

    @property
    def job(self) -> Job:
        return self.model.job

    @property
    def mesh(self) -> Mesh:
        return self.model.mesh


def look_over(job: Job, mesh: Mesh) -> Understood:
    """Put everything on the mesh.

    Raises
    ------
    MeshError   carries all faults that show before solving: places, free motions, contradictions,
        what a load needs and does not find.
    """
    faults = list(placing_faults(job, mesh))
    model = build_model(job, mesh)
    _try(lambda: resolve_supports(job, mesh), faults)
    loads = _try(lambda: resolve_loads(model), faults)
    if faults or loads is None:
        raise MeshError(faults)
    return Understood(model, loads)


def _try(step: Callable[[], T], faults: list[Fault]) -> T | None:
    """What the step makes; None when it finds faults, which are added to those known."""
    try:
        return step()
    except FaultyError as error:
        faults += [fault for fault in error.faults if fault not in faults]
        return None


def describe(understood: Understood, regions: Json) -> Json:
    """Plate, supports, loads and what they come to, ready for JSON.

    regions : of the mesh, as `summary.mesh_figures` gives them

    Returns
    -------
    dict   "plate", "supports" by label, "load_cases", "cases" and "combinations" by name
    """
    job, about = understood.job, centroid(understood.mesh)
    states = load_states(job)
    sums = _resultants(understood, about, states.factors)
    applied = {
        name: {"force": column[:2].tolist(), "moment": float(column[2])}
        for name, column in zip(states.names, sums.T, strict=True)
    }
    by_name = {sum_.name: sum_ for sum_ in (*job.cases, *job.combinations)}
    found: Json = {
        "plate": _plate(understood, regions, about),
        "supports": _supports(understood),
        "load_cases": {
            case.name: {
                "loads": [
                    {"on": target_words(load.on, job.units), "load": load_words(load, job.units)}
                    for load in case.loads
                ]
            }
            for case in job.load_cases
        },
        "cases": {},
        "combinations": {},
    }
    for name, kind in zip(states.names, states.kinds, strict=True):
        factors = by_name[name].factors if name in by_name else {name: 1.0}
        found[f"{kind}s"][name] = {"factors": dict(factors), **applied[name]}
    return found


def _plate(understood: Understood, regions: Json, about: Array) -> Json:
    low, high = understood.mesh.nodes.min(axis=0), understood.mesh.nodes.max(axis=0)
    return {
        "from": low.tolist(),
        "to": high.tolist(),
        "size": (high - low).tolist(),
        "area": sum(region["area"] for region in regions.values()),
        "centroid": about.tolist(),
        "mass": _mass(understood.job, regions),
    }


def _mass(job: Job, regions: Json) -> Json | None:
    """In kg, or lb for plates in inches and feet; None where a density is missing."""
    total = 0.0
    for name, region in regions.items():
        density = job.material_of(name).density
        if region["area"] and density is None:
            return None
        total += region["area"] * region["thickness"] * (density or 0.0)
    unit = "lb" if job.units.length in ("in", "ft") else "kg"
    return {"value": total / to_number(f"1 {unit}", [MASS], job.units), "unit": unit}


def _supports(understood: Understood) -> Json:
    finder = Finder(understood.mesh)
    return {
        support.label: _support(understood, support, finder) for support in understood.job.supports
    }


def _support(understood: Understood, support: Support, finder: Finder) -> Json:
    caught = finder.find(support.on, f"{support.pointer}/on")
    return {
        "on": target_words(support.on, understood.job.units),
        "holds": support_words(understood.job, support),
        "nodes": len(caught.nodes),
        "length": float(understood.mesh.facet_lengths(caught.facets).sum()),
    }


def _resultants(understood: Understood, about: Array, factors: Array) -> Array:
    """Force and moment of the loads in every state, (3, s); mere rounding is zero.

    factors : (c, s) of the load cases in the states
    """
    mesh, forces = understood.mesh, understood.loads.forces
    sums, sizes = np.zeros((3, len(factors))), np.zeros((3, len(factors)))
    reach = np.abs(mesh.nodes - about).sum(axis=1)
    width = max(1, AT_ONCE // (8 * mesh.dof_count))
    for start in range(0, len(factors), width):
        part = slice(start, start + width)
        force = forces.of_cases(part)
        sums[:, part] = resultant(mesh.nodes, force, about)
        size = np.abs(force).sum(axis=1)
        sizes[:2, part], sizes[2, part] = size.sum(axis=0), reach @ size
    found = sums @ factors
    found[np.abs(found) <= ROUNDING * (sizes @ np.abs(factors))] = 0.0
    return found
