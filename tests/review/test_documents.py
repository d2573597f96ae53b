"""Every caution with documents that must raise it and near-misses that must not, each solved."""

from typing import Any

import pytest

from tests.caution_documents import CASES, bar, tie, web
from tests.reviewed import cautions
from workers.cautions import STANDING, Caution
from workers.review.catalogue import RULES

Json = dict[str, Any]

# No document alone raises these: they stand for a fault of the program, or a machine of little
# memory (`test_equations.py`).
OF_THE_PROGRAM = {"equilibrium-open", "solved-by-iteration"}
RAISING = [(code, number) for code, (raising, _) in CASES.items() for number in range(len(raising))]
SILENT = [(code, number) for code, (_, silent) in CASES.items() for number in range(len(silent))]


def named(code: str, found: list[Caution]) -> list[Caution]:
    assert "review-incomplete" not in {caution.code for caution in found}, found
    return [caution for caution in found if caution.code == code]


@pytest.mark.parametrize(("code", "number"), RAISING)
def test_the_caution_is_raised_with_evidence_and_action(code: str, number: int) -> None:
    found = named(code, cautions(CASES[code][0][number]))
    assert found
    for caution in found:
        assert caution.evidence
        assert caution.action


@pytest.mark.parametrize(("code", "number"), SILENT)
def test_a_near_miss_does_not_raise_it(code: str, number: int) -> None:
    assert named(code, cautions(CASES[code][1][number])) == []


def test_every_rule_has_two_documents_of_each_kind() -> None:
    missing = {rule.code for rule in RULES} - set(CASES) - OF_THE_PROGRAM
    assert not missing
    for raising, silent in CASES.values():
        assert len(raising) >= 2
        assert len(silent) >= 2


@pytest.mark.parametrize("document", [tie(), web(), bar()], ids=["strip", "web", "bar"])
def test_a_clean_well_made_job_raises_only_the_two_standing_notes(document: Json) -> None:
    assert cautions(document) == list(STANDING)
