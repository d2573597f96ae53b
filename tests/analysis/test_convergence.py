"""The convergence record: series of meshes, their peaks, and what they say of singular places."""

from collections.abc import Sequence
from typing import Any

import numpy as np
import orjson
import pytest

from tests.refined_documents import panel, ring
from workers.analysis.convergence import Record, _Mesh
from workers.analysis.refiner import refiner
from workers.analysis.series import solve_series
from workers.analysis.solved import Solved
from workers.document.read import read_document
from workers.errors import MeshError

Json = dict[str, Any]


def silent(stage: str, fraction: float) -> None:
    pass


def series(given: Json, **options: Any) -> Solved:
    job = read_document(orjson.dumps(given))
    made = refiner(job)
    return solve_series(job, made, made.series(0), silent, **options)


@pytest.fixture(scope="module")
def on_ring() -> Solved:
    return series(ring("Q8"))


@pytest.fixture(scope="module")
def on_panel() -> Solved:
    return series(panel("Q8", size=20.0))


def test_three_meshes_with_their_errors(on_ring: Solved) -> None:
    """Divisions once, twice, three times those of the document: 8, 32, 72 elements."""
    record = on_ring.results["convergence"]
    assert record["kind"] == "series"
    assert [mesh["elements"] for mesh in record["meshes"]] == [8, 32, 72]
    errors = [mesh["relative_error"] for mesh in record["meshes"]]
    assert errors == sorted(errors, reverse=True)
    assert on_ring.mesh.element_count == 72


def test_every_reported_peak_has_its_series(on_ring: Solved) -> None:
    peaks = on_ring.results["convergence"]["peaks"]["load"]
    assert peaks.keys() == {
        "von_mises", "principal_max", "principal_min", "shear_max", "displacement",
    }  # fmt: skip
    for quantity, entry in peaks.items():
        assert len(entry["values"]) == len(entry["at"]) == len(entry["sizes"]) == 3
        assert entry["values"][-1] == on_ring.results["cases"]["load"][quantity]["value"]
        assert entry["uncertainty"] is not None


@pytest.mark.parametrize("element", ["Q4", "T6", "Q8"])
def test_displacement_is_within_its_uncertainty_of_lames(element: str) -> None:
    """Timoshenko & Goodier art. 28, plane stress: u = c / E ((1 - nu) r + (1 + nu) R^2 / r) at the
    bore r = 20 of a ring to R = 60 under p = 10, c = p r^2 / (R^2 - r^2).
    """
    found = series(ring(element)).results
    c = 10 * 20**2 / (60**2 - 20**2)
    exact = c / 210e3 * (0.7 * 20 + 1.3 * 60**2 / 20)
    entry = found["convergence"]["peaks"]["load"]["displacement"]
    value = found["cases"]["load"]["displacement"]["value"]
    assert entry["behaviour"] == "converging"
    assert abs(value - exact) <= entry["uncertainty"]
    assert abs(entry["extrapolated"] - exact) <= entry["uncertainty"]


@pytest.mark.parametrize("element", ["T3", "Q4", "T6", "Q8"])
def test_the_interval_holds_lames_peak_in_the_light_of_the_series(element: str) -> None:
    """T&G art. 28 at the bore: radial -p, hoop p (R^2 + r^2) / (R^2 - r^2)."""
    found = series(ring(element)).results["cases"]["load"]
    hoop, radial = 10 * (60**2 + 20**2) / (60**2 - 20**2), -10.0
    von_mises = np.sqrt(hoop**2 - hoop * radial + radial**2)
    for name, exact in (("von_mises", von_mises), ("principal_max", hoop)):
        low, high = found[name]["interval"]
        assert low <= exact <= high, name


def test_growth_at_a_corner_is_confirmed(on_panel: Solved) -> None:
    """Stress as r^-0.4555 (Williams 1952): elements of half the size show 1.37 times as much."""
    peak = on_panel.results["cases"]["load"]["von_mises"]
    assert peak["singular"]["confirmed"] is True
    assert peak["singular"]["kind"] == "re-entrant-corner"
    assert on_panel.results["envelope"]["von_mises"]["singular"]["confirmed"] is True


def test_peaks_that_left_out_different_neighbourhoods_are_not_compared(on_panel: Solved) -> None:
    """The radius is two elements here, so it falls from mesh to mesh."""
    entry = on_panel.results["convergence"]["peaks"]["load"]["von_mises"]
    assert entry["behaviour"] == "unresolved"
    assert entry["uncertainty"] is None


def test_a_series_that_would_be_too_large_is_refused_with_its_place() -> None:
    with pytest.raises(MeshError) as caught:
        series(ring("Q8"), most_dofs=300)
    (fault,) = caught.value.faults
    assert fault.pointer == "/requests/convergence"
    assert "300" in fault.message


# --- by hand -------------------------------------------------------------------------------------


def judged(
    values: list[float],
    interval: list[float],
    kind: str = "series",
    at: Sequence[list[float]] | None = None,
) -> Json:
    """The peak of the last mesh of a series made by hand, sizes falling by two from one."""
    record = Record("Q8")
    solved = series(ring("Q8"))
    for number, value in enumerate(values):
        results = {
            "cases": {"load": {**solved.results["cases"]["load"]}},
            "combinations": {},
            "envelope": {**solved.results["envelope"]},
        }
        peak = {**results["cases"]["load"]["von_mises"], "value": value, "interval": interval}
        if at is not None:
            peak["at"] = at[number]
        results["cases"]["load"]["von_mises"] = peak
        record.add(solved.mesh, results)
        record.meshes[-1].sizes["load"]["von_mises"] = 0.5**number
        object.__setattr__(record.meshes[-1], "dofs", 4**number)
    facts = {} if kind == "series" else {"target_error": 0.1}
    record.write(results, kind=kind, **facts)
    found: Json = results["cases"]["load"]["von_mises"]
    return {**found, "series": results["convergence"]["peaks"]["load"]["von_mises"]}


@pytest.mark.parametrize(
    ("exponent", "confirmed"),
    [(0.4555, True), (0.18, True), (0.1, None), (0.02, False), (-0.1, False)],
)
def test_growth_is_confirmed_open_or_refuted(exponent: float, confirmed: bool | None) -> None:
    """Stress h^-exponent on elements of size h, at a corner where theory says 0.4555."""
    singular = {"at": [0.0, 0.0], "exponent": 0.5445}
    record = Record("Q8", diagonal=1.0)
    for h in (4.0, 2.0, 1.0):
        here = {**singular, "value": h**-exponent, "element_size": h}
        state = {"load": {"von_mises": {"singular": here}}}
        record.meshes.append(_Mesh(dofs=1, elements=1, states=state, sizes={}))
    assert record._confirmed("load", "von_mises", singular) is confirmed


def test_a_converging_series_narrows_the_interval() -> None:
    """1, 2, 2.5 with halved sizes: order 1, limit 3, index 1.25 x 0.5 = 0.625."""
    low, high = judged([1.0, 2.0, 2.5], [1.0, 9.0])["interval"]
    # at most to a quarter of 2.5 - 1 and of 9 - 2.5
    assert low == pytest.approx(2.5 - 0.625)
    assert high == pytest.approx(2.5 + 0.25 * 6.5)


def test_an_adaptive_series_takes_the_larger_factor_of_safety() -> None:
    low, _ = judged([1.0, 2.0, 2.5], [0.5, 9.0], kind="adaptive")["interval"]
    assert low == pytest.approx(2.5 - 3 * 0.5)


def test_the_limit_of_a_series_is_never_outside_of_the_interval() -> None:
    assert judged([1.0, 2.0, 2.5], [2.4, 2.6])["interval"][1] == pytest.approx(3.0)


def test_an_erratic_series_leaves_the_interval_alone() -> None:
    assert judged([1.0, 3.0, 2.5], [2.0, 2.9])["interval"] == [2.0, 2.9]


@pytest.mark.parametrize(
    ("last", "behaviour"), [([20.9, 0.0], "growing"), ([0.0, 20.0], "unresolved")]
)
def test_growth_is_told_of_one_place_only(last: list[float], behaviour: str) -> None:
    """1, 1.4, 2 goes as h^-0.5; on the finest mesh the peak is two elements of 0.5 away, or not."""
    places = [[20.0, 0.0], [20.0, 0.0], last]
    found = judged([1.0, 2**0.5, 2.0], [1.0, 3.0], at=places)
    assert found["series"]["behaviour"] == behaviour
