"""One load case: the analysis and the whole job against factorisation and solution alone, memory,
growth with the size."""

import math
import statistics

import pytest

from tests.measuring import (
    HAS_PARDISO,
    LONG,
    ROUNDS,
    at_most,
    in_child,
    not_measured,
    paired,
)

pytestmark = pytest.mark.benchmark

# Times PARDISO's ordering, factorisation and solution alone, by element and unknowns.
ANALYSIS_GOALS = {("Q8", 100_000): 1.0, ("Q4", 100_000): 1.7}
LONG_GOALS = {("Q8", 1_000_000): 0.8, ("Q4", 1_000_000): 1.5}
WHOLE_GOAL = 1.5  # times PARDISO alone, Q8, 100 000 unknowns
SUPERLU_GOAL = 4.0  # times SuperLU's factorisation and solution, the same job
MEMORY_GOAL = 3.3  # kB for each unknown at a million; fewer unknowns have less fill
GROWTH_GOAL = 1.25  # exponent of the unknowns


@pytest.mark.parametrize(
    ("element", "dofs"), [*ANALYSIS_GOALS, *(LONG_GOALS if LONG else ())], ids=str
)
def test_one_case_against_factorisation_and_solution_alone(element: str, dofs: int) -> None:
    alone = ["pardiso"] if HAS_PARDISO else []
    sides = [[side, 1] for side in ("whole", "analysis", "superlu", *alone)]
    found = in_child(element=element, dofs=dofs, rounds=ROUNDS, sides=sides)
    times = {side: found["times"][f"{side} 1"] for side, _ in sides}
    size = f"{element}, {found['dofs']} unknowns, one case"
    goal = (ANALYSIS_GOALS | LONG_GOALS)[element, dofs]
    if HAS_PARDISO:
        at_most(
            f"analysis / PARDISO alone, {size}", paired(times["analysis"], times["pardiso"]), goal
        )
        if (element, dofs) == ("Q8", 100_000):
            ratio = paired(times["whole"], times["pardiso"])
            at_most(f"whole job / PARDISO alone, {size}", ratio, WHOLE_GOAL)
    else:
        not_measured(f"analysis and whole job / PARDISO alone, {size}", f"at most {goal:g}, 1.5")
    ratio = paired(times["whole"], times["superlu"])
    at_most(f"whole job / SuperLU alone, {size}", ratio, SUPERLU_GOAL)
    at_most(f"peak memory, {size}", found["peak"] / found["dofs"] / 1000, MEMORY_GOAL, "kB/unknown")


def test_time_grows_little_faster_than_the_size() -> None:
    small, large = (100_000, 1_000_000) if LONG else (50_000, 200_000)
    found = [
        in_child(element="Q8", dofs=dofs, rounds=ROUNDS, sides=[["analysis", 1]])
        for dofs in (small, large)
    ]
    seconds = [statistics.median(f["times"]["analysis 1"]) for f in found]
    exponent = math.log(seconds[1] / seconds[0]) / math.log(found[1]["dofs"] / found[0]["dofs"])
    size = f"Q8, {found[0]['dofs']} to {found[1]['dofs']} unknowns"
    at_most(f"growth of the analysis time, {size}", exponent, GROWTH_GOAL, "(exponent)")
