"""Which loads act in a case or combination, and with what factor."""

from dataclasses import dataclass

from workers.analysis.combine import factors_of
from workers.job import Job, Load


@dataclass(frozen=True)
class Acting:
    """A load and the factor with which it acts in a state."""

    load: Load
    factor: float


def acting_loads(job: Job, state: str | None) -> list[Acting]:
    """The loads of a case or combination with their factors.

    Raises
    ------
    KeyError   no case and no combination has that name.
    """
    if state is None:
        return []
    loads = {case.name: case.loads for case in job.load_cases}
    return [
        Acting(load, factor)
        for name, factor in factors_of(job, state).items()
        for load in loads[name]
    ]


def acting_cases(job: Job, state: str | None) -> set[str]:
    """Names of the load cases that take part in a case or combination."""
    return set() if state is None else set(factors_of(job, state))
