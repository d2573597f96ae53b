"""The reference cases that ship with the program, as `fishplate verify` runs them.

Targets, sources and tolerances stand in workers/verification/; the closed forms behind them are
checked in `test_convergence.py` by numerical derivatives.
"""

import pytest

from workers.verification.case import Case
from workers.verification.catalogue import CASES
from workers.verification.record import run_case

EVERY = [case for cases in CASES.values() for case in cases]
BUILT_IN = {"T3", "Q4", "T6", "Q8"}


@pytest.mark.slow
@pytest.mark.parametrize("case", EVERY, ids=lambda case: case.name)
def test_the_installed_program_stands_the_case(case: Case) -> None:
    done = run_case("", case)
    for row in done.rows:
        assert row.check is not None, row.trouble
        print(f"{row.check.element}: {row.check.quantity} {row.check.computed:.6g} "
              f"(target {row.check.target:.6g}, {row.check.deviation:+.2e})")  # fmt: skip
    assert [row.check for row in done.rows if row.passed is False] == []
    tried = {name for row in done.rows if row.check for name in BUILT_IN
             if name in row.check.element}  # fmt: skip
    assert tried == BUILT_IN or case.name == "Linear algebra"


def test_every_case_names_its_source_and_the_reason_of_its_tolerances() -> None:
    assert len(EVERY) == len({case.name for case in EVERY}) >= 18
    for case in EVERY:
        assert len(case.source) > 30, case.name
        assert len(case.reason) > 15, case.name
