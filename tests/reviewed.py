"""A small plate under review: sound in every respect, so that a test can spoil one thing at a time.

A steel plate of 200 x 100 x 5 mm, held on the left, pulled on the right, 12 x 6 elements Q8. The
results are written by hand.
"""

from copy import deepcopy
from dataclasses import replace
from typing import Any

import orjson

from tests.plates import grid
from workers import pipeline
from workers.analysis.mesh import Mesh
from workers.analysis.quality import mesh_quality
from workers.cautions import STANDING, Caution
from workers.document.read import read_document
from workers.geometry import PatchGeometry
from workers.job import Job, Limits, LoadCase, Material, Named, Plate, Pressure, Support, Units
from workers.review.review import review

LENGTH, HEIGHT, THICKNESS = 200.0, 100.0, 5.0
STEEL = Material("steel", 210e3, 0.3, 355.0, 7.85e-9, 1.2e-5)


def sound_mesh(element: str = "Q8") -> Mesh:
    return grid(element, 12, 6, size=(LENGTH, HEIGHT))


def sound_job(**changes: Any) -> Job:
    """The job, with some of its parts replaced."""
    job = Job(
        title="Slipway cleat",
        units=Units("mm", "N"),
        materials={"steel": STEEL},
        geometry=PatchGeometry(()),
        plate=Plate("steel", THICKNESS),
        supports=(Support("left", Named("left"), ux=0.0, uy=0.0),),
        load_cases=(LoadCase("pull", (Pressure(on=Named("right"), start=-100.0, end=-100.0),)),),
        limits=Limits(displacement=1.0, factor_on_yield=1.5),
    )
    return replace(job, **changes)


def steel(**changes: Any) -> dict[str, Material]:
    """The one material, with some of its values replaced."""
    return {"steel": replace(STEEL, **changes)}


def sound_state(**changes: Any) -> dict[str, Any]:
    """Results of a case: 120 MPa at (30, 50), 0.1 mm at the free end; some entries replaced."""
    state = {
        "von_mises": {"value": 120.0, "at": [30.0, 50.0], "error": 2.0, "region": "plate"},
        "principal_max": {"value": 125.0, "at": [30.0, 50.0]},
        "principal_min": {"value": -20.0, "at": [30.0, 50.0]},
        "displacement": {"value": 0.1, "at": [LENGTH, 50.0]},
        "reactions": {"left": {"force": [-50e3, 0.0], "moment": 0.0, "about": [0.0, 50.0]}},
        "equilibrium": {"residual": 1e-13},
        "error_estimate": {"relative": 0.03, "energy_norm": 1.0},
        "utilisation": {"value": 120 / 355, "at": [30.0, 50.0], "yield_strength": 355.0},
    }
    return state | changes


def stressed(von_mises: float, at: tuple[float, float] = (30.0, 50.0), error: float = 0.0) -> dict:
    """Results of a case with another peak stress."""
    return sound_state(
        von_mises={"value": von_mises, "at": list(at), "error": error, "region": "plate"},
        utilisation={"value": von_mises / 355, "at": list(at), "yield_strength": 355.0},
    )


def sound_results(
    states: dict[str, dict] | None = None, combinations: dict[str, dict] | None = None
) -> dict[str, Any]:
    return {
        "mesh": {"quality": mesh_quality(sound_mesh())},
        "cases": deepcopy(states) or {"pull": sound_state()},
        "combinations": combinations or {},
    }


def raised(
    job: Job | None = None, results: dict[str, Any] | None = None, **more: Any
) -> dict[str, list[Caution]]:
    """Cautions beside the standing ones, by code."""
    found = review(
        job or sound_job(),
        more.pop("mesh", None) or sound_mesh(),
        sound_results() if results is None else results,
        **more,
    )
    codes: dict[str, list[Caution]] = {}
    for caution in found:
        if caution not in STANDING:
            codes.setdefault(caution.code, []).append(caution)
    return codes


def cautions(document: dict[str, Any]) -> list[Caution]:
    """Read, mesh, solve, summarise, review: as a worker does, without files."""
    job = read_document(orjson.dumps(document))
    done = pipeline.solve(job, pipeline.silent, most_dofs=None, seconds=60.0)
    return review(job, done.mesh, done.results, done.solution, done.recovery)
