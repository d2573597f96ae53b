"""Hundreds of load cases: against one case, against PARDISO, and what each takes of memory."""

import pytest

from tests.measuring import (
    HAS_PARDISO,
    LONG,
    ROUNDS,
    at_least,
    at_most,
    in_child,
    not_measured,
    paired,
    peak_of,
)

pytestmark = pytest.mark.benchmark

DOFS = 100_000 if LONG else 20_000
CASES = 300
AGAINST_ONE, AGAINST_PARDISO = 4.0, 0.45
# On a smaller plate whatever does not grow with the factor weighs more.
AGAINST_PARDISO_ROOM = 2.5 if LONG else 4.0
BYTES_PER_CASE = 16.0  # for each unknown
AGAINST_NAIVE = 200.0
NAIVE_DOFS = 20_000 if LONG else 10_000
NAIVE_CASES = 2  # are timed of the naive script, in every round; the others take as long


def test_300_cases_against_one_and_against_pardiso() -> None:
    sides = [["whole", 1], ["whole", CASES], *([["pardiso", CASES]] if HAS_PARDISO else [])]
    found = in_child(element="Q8", dofs=DOFS, rounds=ROUNDS, sides=sides)
    many, one = found["times"][f"whole {CASES}"], found["times"]["whole 1"]
    size = f"Q8, {found['dofs']} unknowns, {CASES} cases"
    at_most(f"whole job / the same with one case, {size}", paired(many, one), AGAINST_ONE)
    what = f"whole job / PARDISO's factorisation and blocked solutions alone, {size}"
    if HAS_PARDISO:
        ratio = paired(many, found["times"][f"pardiso {CASES}"])
        at_most(what, ratio, AGAINST_PARDISO, room=AGAINST_PARDISO_ROOM)
    else:
        not_measured(what, f"at most {AGAINST_PARDISO:g}")


def test_memory_of_each_further_case() -> None:
    few, many = (
        peak_of(element="Q8", dofs=DOFS, sides=[["whole", cases]])
        for cases in (2 * CASES, 4 * CASES)
    )
    each = (many["peak"] - few["peak"]) / (2 * CASES) / few["dofs"]
    at_most(
        f"each further load case beyond {2 * CASES}, Q8, {few['dofs']} unknowns",
        each, BYTES_PER_CASE, "bytes/unknown", room=1.25,  # not of the load of the machine
    )  # fmt: skip
    assert each > 6  # its displacements alone are 8; the two peaks may lie in different stages


def test_300_cases_against_the_naive_script() -> None:
    """The script's time for 300 cases is its assembly and 150 times that of two cases."""
    sides = [["naive assembly", 1], ["naive cases", NAIVE_CASES], ["whole", CASES]]
    found = in_child(element="Q8", dofs=NAIVE_DOFS, rounds=ROUNDS, sides=sides)
    times = found["times"]
    naive = [
        assembly + cases * CASES / NAIVE_CASES
        for assembly, cases in zip(
            times["naive assembly 1"], times[f"naive cases {NAIVE_CASES}"], strict=True
        )
    ]
    at_least(
        f"naive script / whole job, Q8, {found['dofs']} unknowns, {CASES} cases (script scaled "
        f"from {NAIVE_CASES} cases)",
        paired(naive, times[f"whole {CASES}"]),
        AGAINST_NAIVE,
    )
