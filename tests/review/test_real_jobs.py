"""The review of jobs that were really read, meshed, solved and summarised."""

from copy import deepcopy
from typing import Any

import orjson
import pytest

from tests.job_documents import QUARTER_WEB
from workers.analysis.combine import load_states
from workers.analysis.meshing.build import mesh_job
from workers.analysis.recovery import Recovery
from workers.analysis.solution import solve
from workers.analysis.summary import summarise
from workers.cautions import STANDING, Caution
from workers.document.read import read_document
from workers.review.review import review

WEB: dict[str, Any] = {
    "title": "Web with opening, a quarter",
    "units": {"length": "mm", "force": "N"},
    "materials": {
        "S355": {
            "youngs_modulus": "210 GPa",
            "poissons_ratio": 0.3,
            "yield_strength": "355 MPa",
            "density": "7850 kg/m3",
        }
    },
    "geometry": QUARTER_WEB,
    "plate": {"material": "S355", "thickness": 8},
    "meshing": {"element": "Q8"},
    "supports": [{"on": "low", "uy": 0}, {"on": "left", "ux": 0}],
    "load_cases": {
        "pull": [{"on": "right", "traction": [40, 0]}],
        "push": [{"on": "top", "pressure": 15}],
    },
    "combinations": {"both": {"pull": 1.2, "push": 1.5}},
    "limits": {"displacement": 0.5, "factor_on_yield": 1.2},
}


# A bar of the cradle, bent by a moment at its end.
BAR: dict[str, Any] = WEB | {
    "title": "Cradle bar in bending",
    "geometry": {
        "points": {"pin": [0, 25]},
        "patches": [
            {
                "name": "bar",
                "corners": [[0, 0], [400, 0], [400, 50], [0, 50]],
                "divisions": [16, 2],
                "sides": [None, "tip", None, "root"],
            }
        ],
    },
    "supports": [{"on": "root", "ux": 0}, {"on": "pin", "uy": 0}],
    "load_cases": {"bend": [{"on": "tip", "total_moment": "100 kN*mm"}]},
    "combinations": {},
}


def reviewed(document: dict[str, Any]) -> list[Caution]:
    job = read_document(orjson.dumps(document))
    mesh = mesh_job(job)
    solution = solve(job, mesh)
    recovery = Recovery.build(solution.model)
    results = summarise(solution, recovery, load_states(job))
    return review(job, mesh, results, solution, recovery)


def codes(document: dict[str, Any]) -> set[str]:
    return {caution.code for caution in reviewed(document)} - {c.code for c in STANDING}


def spoilt(**changes: Any) -> dict[str, Any]:
    return deepcopy(WEB) | changes


@pytest.mark.parametrize(
    ("document", "element"), [(WEB, "Q8"), (BAR, "Q8"), (BAR, "T6")], ids=["web", "bar", "bar T6"]
)
def test_a_clean_well_made_job_raises_only_the_two_standing_notes(document, element: str) -> None:
    assert reviewed(document | {"meshing": {"element": element}}) == list(STANDING)


def test_a_stress_of_three_times_the_traction_passes_yield() -> None:
    """Kirsch 1898: three times the tension at the opening, more with the width finite."""
    found = reviewed(
        spoilt(load_cases={"pull": [{"on": "right", "traction": [130, 0]}]}, combinations={})
    )
    (caution,) = [caution for caution in found if caution.code == "yield-exceeded"]
    assert 3 * 130 < caution.evidence["value"] < 4 * 130
    assert caution.evidence["at"] == pytest.approx([0, 30])


def test_a_point_load_next_to_the_peak_is_told() -> None:
    document = spoilt(load_cases={"pull": [{"on": "corner", "force": [20000, 0]}]}, combinations={})
    document["geometry"]["points"] = {"corner": [100, 100]}
    assert "point-load" in codes(document)


def test_a_job_whose_units_slip_is_told_more_than_once() -> None:
    document = spoilt(limits={})
    document["materials"]["S355"] = {"youngs_modulus": 210e9, "poissons_ratio": 0.3}
    assert {"units-suspect", "no-yield-strength"} <= codes(document)


@pytest.mark.parametrize("element", ["Q4", "T3"])
def test_a_coarse_low_order_mesh_in_bending_is_told(element: str) -> None:
    assert {"low-order-bending", "error-high"} <= codes(BAR | {"meshing": {"element": element}})


def test_the_sum_of_factors_of_a_settled_support_is_told() -> None:
    document = spoilt(supports=[{"on": "low", "uy": 0.01}, {"on": "left", "ux": 0}])
    assert codes(document) == {"settlement-factored"}
