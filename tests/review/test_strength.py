"""Yield, the margin against the error, and the job's own limits; the yield strength is 355 MPa."""

from dataclasses import replace

import numpy as np
import pytest

from tests.plates import grid
from tests.reviewed import (
    STEEL,
    raised,
    sound_job,
    sound_results,
    sound_state,
    steel,
    stressed,
)
from workers.geometry import Region
from workers.job import Combination, Limits

NO_LIMITS = Limits()


@pytest.mark.parametrize("peak", [355.1, 900.0])
def test_a_peak_above_yield_stops(peak: float) -> None:
    codes = raised(sound_job(limits=NO_LIMITS), sound_results({"pull": stressed(peak)}))
    (caution,) = codes["yield-exceeded"]
    assert caution.severity == "stop"
    assert caution.evidence["value"] == pytest.approx(peak)
    assert caution.evidence["limit"] == 355
    assert caution.evidence["case"] == "pull"
    assert caution.evidence["at"] == [30, 50]


@pytest.mark.parametrize("peak", [354.9, 355.0])
def test_a_peak_at_or_below_yield_does_not(peak: float) -> None:
    assert raised(sound_job(limits=NO_LIMITS), sound_results({"pull": stressed(peak)})) == {}


def test_the_worst_of_many_states_is_told_and_the_others_are_counted() -> None:
    job = sound_job(
        combinations=(Combination("x 4", {"pull": 4.0}), Combination("x 3", {"pull": 3.0}))
    )
    results = sound_results(combinations={"x 4": stressed(480.0), "x 3": stressed(360.0)})
    (caution,) = raised(job, results)["yield-exceeded"]
    assert caution.evidence["case"] == "x 4"
    assert caution.evidence["states"] == 2
    assert "'x 3'" in caution.message


@pytest.mark.parametrize(("peak", "error"), [(350.0, 6.0), (300.0, 60.0)])
def test_a_margin_smaller_than_the_error_is_not_settled(peak: float, error: float) -> None:
    results = sound_results({"pull": stressed(peak, error=error)})
    codes = raised(sound_job(limits=NO_LIMITS), results)
    (caution,) = codes["margin-within-error"]
    assert caution.evidence["error"] == pytest.approx(error)


@pytest.mark.parametrize(("peak", "error"), [(350.0, 4.0), (300.0, 20.0), (360.0, 20.0)])
def test_a_margin_larger_than_the_error_or_none_at_all_is_settled(
    peak: float, error: float
) -> None:
    results = sound_results({"pull": stressed(peak, error=error)})
    assert "margin-within-error" not in raised(sound_job(limits=NO_LIMITS), results)


def test_a_peak_without_a_known_error_leaves_the_margin_alone() -> None:
    state = stressed(350.0)
    state["von_mises"]["error"] = None
    assert raised(sound_job(limits=NO_LIMITS), sound_results({"pull": state})) == {}


@pytest.mark.parametrize(
    ("limits", "state", "quantity", "value"),
    [
        (Limits(displacement=0.09), sound_state(), "displacement", 0.1),
        (Limits(displacement=1e-6), sound_state(), "displacement", 0.1),
        (Limits(factor_on_yield=3.0), sound_state(), "factor_on_yield", 355 / 120),
        (Limits(factor_on_yield=1.5), stressed(237.0), "factor_on_yield", 355 / 237),
    ],
)
def test_a_limit_of_the_job_that_is_passed_stops(limits, state, quantity, value) -> None:
    (caution,) = raised(sound_job(limits=limits), sound_results({"pull": state}))["limit-exceeded"]
    assert caution.severity == "stop"
    assert caution.evidence["quantity"] == quantity
    assert caution.evidence["value"] == pytest.approx(value)


@pytest.mark.parametrize(
    ("limits", "state"),
    [
        (Limits(displacement=0.11), sound_state()),
        (Limits(displacement=0.1), sound_state()),
        (Limits(factor_on_yield=2.9), sound_state()),
        (Limits(factor_on_yield=1.5), stressed(236.0)),
        (Limits(), sound_state()),
    ],
)
def test_a_limit_that_is_kept_is_silent(limits: Limits, state: dict) -> None:
    assert raised(sound_job(limits=limits), sound_results({"pull": state})) == {}


def two_regions() -> dict:
    return {"mesh": grid("Q8", 12, 6, size=(200.0, 100.0), regions=("plate", "doubler"),
                         region_of_column=np.repeat([0, 1], 6))}  # fmt: skip


def test_a_plate_without_yield_strength_has_not_been_checked() -> None:
    (caution,) = raised(sound_job(materials=steel(yield_strength=None)))["no-yield-strength"]
    assert caution.evidence["materials"] == ["steel"]


def test_one_region_without_yield_strength_is_named() -> None:
    job = replace(
        sound_job(
            materials=steel() | {"bronze": replace(STEEL, name="bronze", yield_strength=None)}
        ),
        geometry=replace(sound_job().geometry, regions=(Region("doubler", material="bronze"),)),
    )
    (caution,) = raised(job, **two_regions())["no-yield-strength"]
    assert caution.evidence["regions"] == ["doubler"]
    assert caution.evidence["materials"] == ["bronze"]


def test_a_material_that_no_element_uses_needs_no_yield_strength() -> None:
    spare = {"bronze": replace(STEEL, name="bronze", yield_strength=None)}
    assert raised(sound_job(materials=steel() | spare)) == {}


def test_regions_that_all_have_a_yield_strength_are_silent() -> None:
    bronze = {"bronze": replace(STEEL, name="bronze", yield_strength=120.0)}
    job = replace(
        sound_job(materials=steel() | bronze),
        geometry=replace(sound_job().geometry, regions=(Region("doubler", material="bronze"),)),
    )
    assert raised(job, **two_regions()) == {}
