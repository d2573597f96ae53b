"""Idle cases, settlements in combinations, peaks next to point loads and point supports."""

from typing import Any

import pytest

from tests.reviewed import raised, sound_job, sound_results, sound_state, stressed
from workers.job import (
    Combination,
    Load,
    LoadCase,
    Named,
    PointForce,
    Pressure,
    Spring,
    Support,
)

PULL = LoadCase("pull", (Pressure(on=Named("right"), start=-100.0, end=-100.0),))
STILL = {"value": 0.0, "at": [0.0, 0.0]}
LEFT = Support("left", Named("left"), ux=0.0, uy=0.0)


# --- nothing happens ---------------------------------------------------------------------------


def test_a_case_in_which_nothing_moves_is_named() -> None:
    job = sound_job(load_cases=(PULL, LoadCase("empty", ())))
    idle = sound_state(displacement=STILL, von_mises={"value": 0.0, "at": [0.0, 0.0]})
    codes = raised(job, sound_results({"pull": sound_state(), "empty": idle}))
    (caution,) = codes["unloaded-case"]
    assert caution.evidence["cases"] == ["empty"]


def test_a_combination_whose_loads_cancel_is_named() -> None:
    """What is left is rounding."""
    job = sound_job(combinations=(Combination("nothing", {"pull": 0.0}),))
    rest = sound_state(displacement={"value": 1e-16, "at": [0.0, 0.0]})
    codes = raised(job, sound_results(combinations={"nothing": rest}))
    assert codes["unloaded-case"][0].evidence["case"] == "nothing"


def test_a_job_in_which_nothing_moves_at_all_is_named() -> None:
    codes = raised(results=sound_results({"pull": sound_state(displacement=STILL)}))
    assert codes["unloaded-case"][0].evidence["cases"] == ["pull"]


@pytest.mark.parametrize("displacement", [1e-9, 1e-4])
def test_a_case_with_a_small_load_is_not_idle(displacement: float) -> None:
    job = sound_job(load_cases=(PULL, LoadCase("wind", ())))
    small = sound_state(displacement={"value": displacement, "at": [0.0, 0.0]})
    assert raised(job, sound_results({"pull": sound_state(), "wind": small})) == {}


# --- settlements -------------------------------------------------------------------------------


def settled(**support: Any) -> tuple[Support, ...]:
    return (LEFT, Support("right", Named("right"), **support))


TOTAL = {"pull": 1.35, "push": 1.5}


def combined(supports: tuple[Support, ...], factors: dict[str, float]) -> dict:
    job = sound_job(
        supports=supports,
        load_cases=(PULL, LoadCase("push", PULL.loads)),
        combinations=(Combination("both", factors),),
    )
    states = {"pull": sound_state(), "push": sound_state()}
    return raised(job, sound_results(states, {"both": sound_state()}))


@pytest.mark.parametrize(
    "support", [{"uy": -0.5}, {"normal": 0.1}, {"along": (1.0, 1.0), "displacement": 0.2}]
)
def test_a_settlement_in_every_case_is_multiplied_by_the_sum_of_the_factors(support) -> None:
    """1.35 + 1.5: the settlement of both cases is superposed."""
    (caution,) = combined(settled(**support), TOTAL)["settlement-factored"]
    assert caution.evidence["value"] == pytest.approx(2.85)
    assert caution.evidence["supports"] == ["right"]
    assert caution.evidence["combinations"] == ["both"]


def test_factors_that_cancel_lose_the_settlement() -> None:
    (caution,) = combined(settled(uy=-0.5), {"pull": 1.0, "push": -1.0})["settlement-factored"]
    assert caution.evidence["value"] == 0


@pytest.mark.parametrize(
    ("supports", "factors"),
    [
        (settled(uy=0.0), TOTAL),  # nothing settles
        (settled(uy=-0.5, case="push"), TOTAL),  # a settlement of one case has its factor
        (settled(uy=-0.5), {"pull": 0.6, "push": 0.4}),  # a mean of cases
        (settled(uy=-0.5), {"pull": 1.0}),
    ],
)
def test_a_settlement_that_keeps_its_size_is_silent(supports, factors) -> None:
    assert combined(supports, factors) == {}


# --- points ------------------------------------------------------------------------------------

CORNER = (200.0, 100.0)  # the point "NE"; elements are 16.7 mm squares, 23.6 mm across


def pointed(loads: tuple[Load, ...]) -> tuple[LoadCase, ...]:
    return (LoadCase("pull", loads),)


FORCE = PointForce(on=Named("NE"), force=(0.0, -1000.0))


@pytest.mark.parametrize("at", [CORNER, (180.0, 90.0)])
def test_a_peak_next_to_a_point_load_tells_the_size_of_the_elements(at) -> None:
    results = sound_results({"pull": stressed(200.0, at)})
    (caution,) = raised(sound_job(load_cases=pointed((FORCE,))), results)["point-load"]
    assert caution.evidence["case"] == "pull"
    assert caution.evidence["at"] == [200, 100]
    assert caution.evidence["value"] < caution.evidence["limit"] == pytest.approx(47.14, rel=1e-3)


def test_a_combination_inherits_the_point_loads_of_its_cases() -> None:
    job = sound_job(
        load_cases=pointed((FORCE,)), combinations=(Combination("twice", {"pull": 2.0}),)
    )
    results = sound_results(combinations={"twice": stressed(200.0, CORNER)})
    assert raised(job, results)["point-load"][0].evidence["case"] == "twice"


@pytest.mark.parametrize(
    ("loads", "at"),
    [
        ((FORCE,), (30.0, 50.0)),  # the peak is elsewhere
        ((FORCE,), (150.0, 80.0)),  # just too far
        (PULL.loads, CORNER),  # a side load ends there
        ((PointForce(on=Named("NE"), force=(0.0, 0.0)),), CORNER),  # no force
    ],
)
def test_a_peak_that_no_point_load_makes_is_silent(loads, at) -> None:
    results = sound_results({"pull": stressed(200.0, at)})
    assert raised(sound_job(load_cases=pointed(loads)), results) == {}


def test_a_point_load_that_a_combination_leaves_out_is_not_to_blame() -> None:
    job = sound_job(
        load_cases=(PULL, LoadCase("crane", (FORCE,))),
        combinations=(Combination("without", {"pull": 1.5, "crane": 0.0}),),
    )
    states = {"pull": sound_state(), "crane": sound_state()}
    assert raised(job, sound_results(states, {"without": stressed(200.0, CORNER)})) == {}


def held(support: Support, reaction: float, at: tuple[float, float]) -> dict:
    state = stressed(200.0, at)
    state["reactions"] = {
        "left": {"force": [-50e3, 0.0]},
        support.label: {"force": [0.0, reaction]},
    }
    return raised(sound_job(supports=(LEFT, support)), sound_results({"pull": state}))


PROP = Support("prop", Named("SE"), uy=0.0)


@pytest.mark.parametrize(
    "support", [PROP, Support("pad", Named("SE"), spring=Spring(x=0.0, y=5000.0))]
)
def test_a_peak_next_to_a_loaded_point_support_tells_the_size_of_the_elements(support) -> None:
    (caution,) = held(support, 1000.0, (199.0, 3.0))["point-support"]
    assert caution.evidence["at"] == [200, 0]


@pytest.mark.parametrize(
    ("support", "reaction", "at"),
    [
        (PROP, 1000.0, (30.0, 50.0)),  # the peak is elsewhere
        (PROP, 1e-5, (199.0, 3.0)),  # it only stops a rigid motion
        (Support("edge", Named("right"), uy=0.0), 1000.0, (199.0, 3.0)),  # a whole side
    ],
)
def test_a_peak_that_no_point_support_makes_is_silent(support, reaction, at) -> None:
    assert held(support, reaction, at) == {}
