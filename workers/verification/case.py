"""What a verification case is: a source, and checks of computed numbers against its targets."""

from collections.abc import Callable, Iterator
from dataclasses import dataclass


@dataclass(frozen=True)
class Check:
    """One number against its target.

    quantity : what it is, with its unit
    element : the element type or types it was computed with
    tolerance : of the deviation; None where the number is only reported, because the element is
        known to be poor there
    scale : what the deviation is a part of; the target if None
    """

    quantity: str
    element: str
    target: float
    computed: float
    tolerance: float | None
    scale: float | None = None

    @property
    def deviation(self) -> float:
        """Computed less target, as a part of the scale."""
        scale = abs(self.target) if self.scale is None else self.scale
        return (self.computed - self.target) / scale

    @property
    def passed(self) -> bool | None:
        """None where the number is only reported; what is not a number fails."""
        return None if self.tolerance is None else bool(abs(self.deviation) <= self.tolerance)


Checks = Iterator[Check]


@dataclass(frozen=True)
class Case:
    """A reference case.

    source : where the targets come from
    reason : why the tolerances are what they are
    """

    name: str
    source: str
    reason: str
    checks: Callable[[], Checks]


def case(name: str, *, source: str, reason: str) -> Callable[[Callable[[], Checks]], Case]:
    """Make a case of a generator of checks."""

    def declare(checks: Callable[[], Checks]) -> Case:
        return Case(name, source, reason, checks)

    return declare
