"""Nearly free plates, lost digits, open equilibrium."""

from types import SimpleNamespace

import pytest

from tests.reviewed import raised, sound_job, sound_mesh, sound_results, sound_state, stressed
from workers.analysis.solution import solve
from workers.job import (
    Limits,
    LoadCase,
    Named,
    Pressure,
    Spring,
    Support,
    TemperatureChange,
    TotalForce,
)


def moved(displacement: float, stress: float, job=None) -> dict:
    state = stressed(stress) | {"displacement": {"value": displacement, "at": [0.0, 0.0]}}
    return raised(job or sound_job(limits=Limits()), sound_results({"pull": state}))


@pytest.mark.parametrize(("displacement", "stress"), [(0.5, 0.1), (200.0, 150.0)])
def test_a_plate_that_moves_without_strain_is_nearly_free(displacement, stress) -> None:
    """The strain is stress / 210 GPa; a thousand times that is all that bending can explain."""
    (caution,) = moved(displacement, stress)["near-mechanism"]
    assert caution.evidence["value"] > caution.evidence["limit"] == 1000
    assert caution.evidence["value"] == pytest.approx(displacement / 223.607 / stress * 210e3, 1e-4)


@pytest.mark.parametrize(("displacement", "stress"), [(0.1, 0.1), (0.5, 100.0), (0.0, 0.0)])
def test_a_plate_that_moves_as_its_strain_lets_it_is_held(displacement, stress) -> None:
    assert "near-mechanism" not in moved(displacement, stress)


def test_a_settlement_moves_a_plate_without_strain_and_is_silent() -> None:
    job = sound_job(limits=Limits(), supports=(Support("left", Named("left"), ux=5.0, uy=0.0),))
    assert "near-mechanism" not in moved(5.0, 0.001, job)


def test_free_expansion_moves_a_plate_without_stress_and_is_silent() -> None:
    """1.2e-5 x 50 K x 223 mm = 0.13 mm."""
    job = sound_job(load_cases=(LoadCase("pull", (TemperatureChange(change=50.0),)),))
    assert "near-mechanism" not in moved(0.13, 1e-9, job)


@pytest.mark.parametrize(("stiffness", "found"), [(1e-4, True), (1e-2, True), (50.0, False)])
def test_springs_that_are_too_soft_are_found_in_a_real_solution(stiffness, found) -> None:
    """The plate hangs on springs along its left side; stress does not depend on them."""
    supports = (Support("left", Named("left"), spring=Spring(x=stiffness, y=stiffness)),)
    loads = (TotalForce(on=Named("right"), force=(100.0, 0.0)),)
    job = sound_job(supports=supports, load_cases=(LoadCase("pull", loads),), limits=Limits())
    solution = solve(job, sound_mesh())
    largest = float(abs(solution.displacement).max())
    state = stressed(0.2) | {"displacement": {"value": largest, "at": [0.0, 0.0]}}
    codes = raised(job, sound_results({"pull": state}), solution=solution)
    assert ("near-mechanism" in codes) == found


def solved(reciprocal_condition: float) -> SimpleNamespace:
    solution = solve(sound_job(), sound_mesh())
    return SimpleNamespace(
        cases=solution.cases,
        displacement=solution.displacement,
        temperature=None,
        solver=SimpleNamespace(reciprocal_condition=reciprocal_condition, iteration=None),
    )


@pytest.mark.parametrize("condition", [0.0, 9e-13, 1e-16])
def test_a_matrix_that_loses_most_digits_is_told(condition: float) -> None:
    (caution,) = raised(solution=solved(condition))["ill-conditioned"]
    assert caution.evidence["value"] == condition


@pytest.mark.parametrize("condition", [1.1e-12, 1e-7])
def test_an_ordinary_matrix_is_silent(condition: float) -> None:
    assert raised(solution=solved(condition)) == {}


def test_the_matrix_of_a_sound_plate_is_ordinary() -> None:
    assert raised(solution=solve(sound_job(), sound_mesh())) == {}


@pytest.mark.parametrize("element", ["Q4", "Q8"])
def test_a_plate_solved_by_iteration_is_told_with_what_is_left(element: str) -> None:
    solution = solve(sound_job(), sound_mesh(element), method="iterative")
    (caution,) = raised(solution=solution)["solved-by-iteration"]
    assert 0 < caution.evidence["value"] < caution.evidence["limit"]
    assert caution.evidence["residual"] == solution.solver.residual.max()


@pytest.mark.parametrize("memory", [None, 1e9])
def test_a_plate_with_a_factor_is_silent_about_iteration(memory: float | None) -> None:
    assert raised(solution=solve(sound_job(), sound_mesh(), memory=memory)) == {}


@pytest.mark.parametrize("residual", [2e-6, 1.0, float("nan")])
def test_loads_and_reactions_that_do_not_balance_stop(residual: float) -> None:
    results = sound_results({"pull": sound_state(equilibrium={"residual": residual})})
    (caution,) = raised(results=results)["equilibrium-open"]
    assert caution.severity == "stop"
    assert caution.evidence["case"] == "pull"


@pytest.mark.parametrize("residual", [0.0, 1e-9, 9e-7])
def test_loads_and_reactions_that_balance_are_silent(residual: float) -> None:
    results = sound_results({"pull": sound_state(equilibrium={"residual": residual})})
    assert raised(results=results) == {}


def test_the_case_that_is_most_out_of_balance_is_told() -> None:
    job = sound_job(load_cases=tuple(LoadCase(name, (
        Pressure(on=Named("right"), start=-1.0, end=-1.0),)) for name in ("a", "b")))  # fmt: skip
    states = {
        "a": sound_state(equilibrium={"residual": 1e-4}),
        "b": sound_state(equilibrium={"residual": 1e-3}),
    }
    (caution,) = raised(job, sound_results(states))["equilibrium-open"]
    assert caution.evidence["case"] == "b"
