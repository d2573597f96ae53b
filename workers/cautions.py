"""The caution: what a reviewer must know before using a number, and the two that are always there.

Numpy-free, so that the API can put cautions on every response without the analysis stack.
The rules that raise cautions from a job's own numbers are in `workers/review/`.
"""

from collections.abc import Mapping
from dataclasses import dataclass, field
from types import MappingProxyType
from typing import Any, Literal

Severity = Literal["stop", "check", "note"]

SEVERITIES: Mapping[Severity, str] = MappingProxyType(
    {
        "stop": "the result should not be used as it is",
        "check": "a person must decide",
        "note": "good to know",
    }
)


@dataclass(frozen=True)
class Caution:
    """One review caution.

    evidence : JSON-ready facts: value, limit, `at` [x, y], `case`, names; empty when there is none.
    action : what the reader should do about it.
    """

    code: str
    severity: Severity
    message: str
    action: str
    evidence: Mapping[str, Any] = field(default_factory=dict)

    def as_json(self) -> dict[str, Any]:
        return {
            "code": self.code,
            "severity": self.severity,
            "message": self.message,
            "evidence": dict(self.evidence),
            "action": self.action,
        }


STANDING: tuple[Caution, ...] = (
    Caution(
        code="linear-plane-stress",
        severity="note",
        message=(
            "Linear, small-displacement plane stress only: no out-of-plane buckling or bending, "
            "no yielding, no fatigue, no weld or bolt check."
        ),
        action="Check separately what this analysis leaves out.",
    ),
    Caution(
        code="engineer-review",
        severity="note",
        message=(
            "A qualified engineer must review the model and the results; local codes and "
            "regulations govern."
        ),
        action="Have a licensed engineer review and sign the job before anything relies on it.",
    ),
)
