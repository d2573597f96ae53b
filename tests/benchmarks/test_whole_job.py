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
    peak_of,
)

pytestmark = pytest.mark.benchmark

# Times PARDISO's ordering, factorisation and solution alone, by element and unknowns.
ANALYSIS_GOALS = {("Q8", 100_000): 1.0, ("Q4", 100_000): 1.7}
LONG_GOALS = {("Q8", 1_000_000): 0.8, ("Q4", 1_000_000): 1.5}
WHOLE_GOAL = 1.5  # times PARDISO alone, Q8, 100 000 unknowns
# Times SuperLU's factorisation and solution of the same matrix, which a build can measure: it has
# no PARDISO. Of Q4, where the factor is the smaller part of a job.
SUPERLU_GOALS = {"Q8": 2.0, "Q4": 3.5}
MEMORY_GOAL = 3.3  # kB for each unknown at a million; fewer unknowns have less fill
GROWTH_GOAL = 1.25  # exponent of the unknowns
SHORT = 30_000  # unknowns instead of 100 000


@pytest.mark.parametrize(
    ("element", "dofs"), [*ANALYSIS_GOALS, *(LONG_GOALS if LONG else ())], ids=str
)
def test_one_case_against_factorisation_and_solution_alone(element: str, dofs: int) -> None:
    goal = (ANALYSIS_GOALS | LONG_GOALS)[element, dofs]
    small = dofs <= 100_000
    sides = ["whole", "analysis"] + ["superlu"] * small + ["pardiso"] * HAS_PARDISO
    found = in_child(
        element=element,
        dofs=dofs if LONG else SHORT,
        rounds=ROUNDS,
        sides=[[side, 1] for side in sides],
    )
    times = {side: found["times"][f"{side} 1"] for side in sides}
    size = f"{element}, {found['dofs']} unknowns, one case"
    if HAS_PARDISO:
        ratio = paired(times["analysis"], times["pardiso"])
        at_most(f"analysis / PARDISO alone, {size}", ratio, goal)
        if element == "Q8" and small:
            ratio = paired(times["whole"], times["pardiso"])
            at_most(f"whole job / PARDISO alone, {size}", ratio, WHOLE_GOAL)
    else:
        not_measured(f"analysis / PARDISO alone, {size}", f"at most {goal:g}")
    if small:
        ratio = paired(times["whole"], times["superlu"])
        at_most(f"whole job / SuperLU alone, {size}", ratio, SUPERLU_GOALS[element])


def test_peak_memory_of_one_case() -> None:
    found = peak_of(element="Q8", dofs=1_000_000 if LONG else 100_000, sides=[["whole", 1]])
    what = f"peak memory, Q8, {found['dofs']} unknowns, one case"
    # bytes do not depend on the load of the machine: no more than a tenth of room
    at_most(what, found["peak"] / found["dofs"] / 1000, MEMORY_GOAL, "kB/unknown", room=1.1)


def test_time_grows_little_faster_than_the_size() -> None:
    small, large = (100_000, 1_000_000) if LONG else (SHORT, 4 * SHORT)
    found = [
        in_child(element="Q8", dofs=dofs, rounds=ROUNDS, sides=[["analysis", 1]])
        for dofs in (small, large)
    ]
    seconds = [statistics.median(f["times"]["analysis 1"]) for f in found]
    exponent = math.log(seconds[1] / seconds[0]) / math.log(found[1]["dofs"] / found[0]["dofs"])
    size = f"Q8, {found[0]['dofs']} to {found[1]['dofs']} unknowns"
    # an exponent of 1.6 over a decade is more than twice the time of one of 1.25
    what = f"growth of the analysis time, {size}"
    at_most(what, exponent, GROWTH_GOAL, "(exponent)", room=1.3)
