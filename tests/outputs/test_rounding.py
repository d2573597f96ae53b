"""Rounding becomes zero for the reader, everything else stays as it is."""

from copy import deepcopy

import pytest

from tests.sheet_samples import small_job, small_results
from workers.outputs.rounding import settle

# The sample: E = 210 GPa on 8 mm x 4000 mm2, so stresses below 1e-12 x 210 000 = 2.1e-7 MPa, forces
# below 2.1e-7 x 8 x sqrt(4000) = 1.0625e-4 N, moments below 1.0625e-4 x sqrt(4000) = 6.72e-3 N mm.
FORCE, MOMENT = 1.0625e-4, 6.72e-3


@pytest.mark.parametrize(("force", "shown"), [(0.9 * FORCE, 0.0), (1.1 * FORCE, 1.1 * FORCE)])
def test_forces_of_rounding_are_zero(force: float, shown: float) -> None:
    results = deepcopy(small_results())
    results["cases"]["pull"]["reactions"]["left"]["force"] = [-32000.0, force]
    results["cases"]["pull"]["equilibrium"]["applied"] = [32000.0, -force, 0.0]
    results["cuts"]["root"]["pull"]["shear"] = force
    state = settle(small_job(), results)
    assert state["cases"]["pull"]["reactions"]["left"]["force"] == [-32000.0, shown]
    assert state["cases"]["pull"]["equilibrium"]["applied"] == [32000.0, -shown, 0.0]
    assert state["cuts"]["root"]["pull"]["shear"] == shown


@pytest.mark.parametrize(
    ("moment", "shown"), [(-0.9 * MOMENT, 0.0), (-1.1 * MOMENT, -1.1 * MOMENT)]
)
def test_moments_of_rounding_are_zero(moment: float, shown: float) -> None:
    results = small_results()
    results["cuts"]["root"]["pull"]["moment"] = moment
    assert settle(small_job(), results)["cuts"]["root"]["pull"]["moment"] == shown


def test_stresses_of_rounding_are_zero() -> None:
    """Below 1e-9 of the peak, here of 1000 MPa."""
    results = deepcopy(small_results())
    results["cases"]["pull"]["von_mises"] = {**results["cases"]["pull"]["von_mises"], "value": 1e3}
    results["probes"]["middle"]["pull"]["stress"] = [1000.0, 9e-7, 2e-6]
    results["envelope"]["principal_min"] = {**results["envelope"]["principal_min"], "value": -9e-7}
    settled = settle(small_job(), results)
    assert settled["probes"]["middle"]["pull"]["stress"] == [1000.0, 0.0, 2e-6]
    assert settled["envelope"]["principal_min"]["value"] == 0.0


def test_a_plate_that_moves_freely_with_heat_has_no_stress() -> None:
    """1e-12 of Young's modulus of 210 GPa is 2e-7 MPa: strain of that size is rounding."""
    results = deepcopy(small_results())
    for section in (results["cases"]["pull"], results["combinations"]["pull, factored"]):
        section["von_mises"] = {**section["von_mises"], "value": 1.9e-7}
    assert settle(small_job(), results)["cases"]["pull"]["von_mises"]["value"] == 0.0


def test_the_results_themselves_stay_as_they_are() -> None:
    results = small_results()
    before = deepcopy(results)
    settle(small_job(), results)
    assert results == before


def test_nothing_else_changes() -> None:
    """Where there is no rounding, settled results are the results."""
    assert settle(small_job(), small_results()) == small_results()


def test_places_of_rounding_are_zero() -> None:
    """The middle of a symmetric plate is at 0, not at 1e-15 of its unit."""
    results = small_results()
    state = results["cases"]["pull"]
    state["equilibrium"]["about"] = [-1.7e-15, 20.0]
    state["von_mises"]["at"] = [100.0, 3e-14]
    shown = settle(small_job(), results)["cases"]["pull"]
    assert shown["equilibrium"]["about"] == [0.0, 20.0]
    assert shown["von_mises"]["at"] == [100.0, 0.0]
