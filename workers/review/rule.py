"""What a review rule is: a code, a grade, words for the reader, and a function that finds.

To add a rule, write a generator of findings in the module of its subject and put `@rule(...)` on
it; nothing else needs to change. A new subject is a new module, named once in `catalogue.py`.
"""

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from workers.cautions import Caution, Severity
from workers.review.context import ReviewContext


@dataclass(frozen=True)
class Finding:
    """One thing that a rule found; evidence is ready for JSON."""

    message: str
    evidence: Mapping[str, Any]


Find = Callable[[ReviewContext], Iterator[Finding]]


@dataclass(frozen=True)
class Rule:
    """A rule of the catalogue.

    looks_at : the numbers that the rule compares, and with what.
    action : what the reader should do about a finding.
    """

    code: str
    severity: Severity
    title: str
    looks_at: str
    action: str
    find: Find

    def cautions(self, context: ReviewContext) -> list[Caution]:
        return [
            Caution(self.code, self.severity, found.message, self.action, found.evidence)
            for found in self.find(context)
        ]

    def as_json(self) -> dict[str, str]:
        return {
            "code": self.code,
            "severity": self.severity,
            "title": self.title,
            "looks_at": self.looks_at,
            "action": self.action,
        }


def rule(
    code: str, severity: Severity, *, title: str, looks_at: str, action: str
) -> Callable[[Find], Rule]:
    """Make a rule of a generator of findings."""

    def declare(find: Find) -> Rule:
        return Rule(code, severity, title, looks_at, action, find)

    return declare


def finding(message: str, **evidence: Any) -> Finding:
    """A finding with its facts; by convention value, limit, at [x, y], case.

    Facts that are None are left out; numpy numbers and arrays become plain ones.
    """
    return Finding(message, {k: _plain(v) for k, v in evidence.items() if v is not None})


def _plain(value: Any) -> Any:
    if isinstance(value, np.ndarray | np.generic):
        return value.tolist()
    return [_plain(item) for item in value] if isinstance(value, list | tuple) else value
