"""Every caution with documents that must raise it and near-misses that must not, each solved."""

from typing import Any

import pytest

from tests.caution_documents import CASES, bar, tie, web
from tests.outlines import solved
from workers.analysis.combine import load_states
from workers.analysis.summary import summarise
from workers.cautions import STANDING, Caution
from workers.review.catalogue import RULES
from workers.review.review import review

Json = dict[str, Any]

# No document should ever raise these: they stand for a fault of the program (`test_equations.py`).
OF_THE_PROGRAM = {"equilibrium-open"}
# Raised from the record of refined meshes, which these small jobs do not have.
RAISING = [(code, number) for code, (raising, _) in CASES.items() for number in range(len(raising))]
SILENT = [(code, number) for code, (_, silent) in CASES.items() for number in range(len(silent))]


def cautions(document: Json) -> list[Caution]:
    """Read, mesh, solve, summarise, review: as a worker does, without files."""
    job = solved(document)
    results = summarise(job.solution, job.recovery, load_states(job.job))
    return review(job.job, job.mesh, results, job.solution, job.recovery)


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
