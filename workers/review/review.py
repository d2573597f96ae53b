"""The review of one job: every rule of the catalogue, the gravest findings first."""

from collections.abc import Mapping
from typing import TYPE_CHECKING, Any

from workers.analysis.mesh import Mesh
from workers.cautions import SEVERITIES, STANDING, Caution
from workers.job import Job
from workers.review.catalogue import INCOMPLETE, RULES
from workers.review.context import ReviewContext
from workers.review.rule import Rule

if TYPE_CHECKING:
    from workers.analysis.recovery import Recovery
    from workers.analysis.solution import Solution


def review(
    job: Job,
    mesh: Mesh,
    results: Mapping[str, Any] | None = None,
    solution: "Solution | None" = None,
    recovery: "Recovery | None" = None,
) -> list[Caution]:
    """Cautions for a job: stop, check, note, and the standing ones last.

    results : as in results.json; None for a job that has not been solved
    solution, recovery : displacements of the load cases, and how stress is formed from them; rules
        that need them find nothing without
    """
    context = ReviewContext(job, mesh, results or {}, solution, recovery)
    found = [caution for rule in RULES for caution in _apply(rule, context)]
    grades = list(SEVERITIES)
    return [*sorted(found, key=lambda caution: grades.index(caution.severity)), *STANDING]


def _apply(rule: Rule, context: ReviewContext) -> list[Caution]:
    try:
        return rule.cautions(context)
    except Exception as error:  # noqa: BLE001  one broken rule must not cost the job its results
        return [
            Caution(
                code=INCOMPLETE["code"],
                severity="check",
                message=f"The check {rule.code!r} ({rule.title}) could not be made: {error!r}.",
                action=INCOMPLETE["action"],
                evidence={"rule": rule.code},
            )
        ]
