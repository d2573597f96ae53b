"""Which loads act in a load case or combination, and with what factor."""

from dataclasses import dataclass

from workers.job import Job, Load


@dataclass(frozen=True)
class Acting:
    """A load and the factor with which it acts in a case (1) or combination."""

    load: Load
    factor: float


def acting_loads(job: Job, state: str | None) -> list[Acting]:
    """The loads of a case, or those of a combination with their factors.

    Raises
    ------
    KeyError   no case and no combination has that name.
    """
    if state is None:
        return []
    cases = {case.name: case.loads for case in job.load_cases}
    if state in cases:
        return [Acting(load, 1.0) for load in cases[state]]
    factors = {combination.name: combination.factors for combination in job.combinations}[state]
    return [
        Acting(load, factor)
        for name, factor in factors.items()
        if factor != 0
        for load in cases[name]
    ]


def acting_cases(job: Job, state: str | None) -> set[str]:
    """Names of the load cases that take part in a case or combination."""
    factors = {combination.name: combination.factors for combination in job.combinations}
    if state in factors:
        return {name for name, factor in factors[state].items() if factor != 0}
    return set() if state is None else {state}
