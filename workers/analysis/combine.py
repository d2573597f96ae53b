"""Cases and their combinations as columns of one matrix of factors on the load cases.

The analysis is linear: displacements, stress components, reactions and temperature changes of a
combination are sums of those of its cases, and those of a case that is given by factors sums of
those of the load cases. Von Mises and principal stresses are not, and are formed afterwards.
"""

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from workers.job import Combination, Job

Array = NDArray[np.float64]
Kind = Literal["case", "combination"]


@dataclass(frozen=True, eq=False)
class States:
    """All cases, then all combinations.

    names, kinds : one for each of the s states
    factors : (c, s) array   how much of each load case a state holds
    loaded : how many of the first states are the load cases themselves, one after the other
    """

    names: tuple[str, ...]
    kinds: tuple[Kind, ...]
    factors: Array
    loaded: int

    def __len__(self) -> int:
        return len(self.names)

    def index(self, name: str) -> int:
        """Column of a state.

        Raises
        ------
        KeyError   there is no such state.
        """
        if name not in self.names:
            raise KeyError(f"no load case or combination {name!r}; there are: {self.names}")
        return self.names.index(name)

    def chunks(self, size: int) -> Iterator[range]:
        """Ranges of at most `size` columns that together are all states."""
        for start in range(0, len(self), size):
            yield range(start, min(start + size, len(self)))


def state_names(job: Job) -> tuple[str, ...]:
    """Names of all cases, then of all combinations."""
    return tuple(state.name for state in (*(job.cases or job.load_cases), *job.combinations))


def load_states(job: Job) -> States:
    """The states of a job, in the order of the document."""
    patterns = tuple(case.name for case in job.load_cases)
    if job.cases:
        cases = tuple(case.name for case in job.cases)
        factors = _columns(patterns, job.cases)
    else:
        cases, factors = patterns, np.eye(len(patterns))
    combined = factors @ _columns(cases, job.combinations)
    kinds: tuple[Kind, ...] = tuple("case" for _ in cases)
    return States(
        names=state_names(job),
        kinds=kinds + tuple("combination" for _ in job.combinations),
        factors=np.hstack((factors, combined)),
        loaded=0 if job.cases else len(cases),
    )


def _columns(names: tuple[str, ...], sums: tuple[Combination, ...]) -> Array:
    """Factors of the named in each of the sums, (names, sums)."""
    row = {name: number for number, name in enumerate(names)}
    factors = np.zeros((len(names), len(sums)))
    for column, combination in enumerate(sums):
        for name, factor in combination.factors.items():
            factors[row[name], column] = factor
    return factors


def factors_of(job: Job, state: str) -> dict[str, float]:
    """Factor of each load case that takes part in a state, in the order in which they are named.

    Raises
    ------
    KeyError   there is no such state.
    """
    given = {case.name: case.factors for case in job.cases}
    cases = given or {case.name: {case.name: 1.0} for case in job.load_cases}
    if state in cases:
        return {name: factor for name, factor in cases[state].items() if factor != 0}
    combined = {combination.name: combination.factors for combination in job.combinations}[state]
    total: dict[str, float] = {}
    for case, factor in combined.items():
        for name, share in cases[case].items():
            total[name] = total.get(name, 0.0) + factor * share
    return {name: factor for name, factor in total.items() if factor != 0}


def superpose(values: Array, states: States, columns: range) -> Array:
    """Sum the load cases of some states, (..., c) -> (..., k), in memory of its own."""
    factors = states.factors[:, columns.start : columns.stop]
    if columns.stop <= states.loaded:
        return np.ascontiguousarray(values[..., columns.start : columns.stop])
    used = np.flatnonzero(factors.any(axis=1))
    return np.matmul(values[..., used], factors[used])


def superpose_blocks(
    values: tuple[Array, ...] | None, states: States, columns: range
) -> tuple[Array, ...] | None:
    """The same for one array per block of the mesh, or none."""
    return None if values is None else tuple(superpose(v, states, columns) for v in values)
