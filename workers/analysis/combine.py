"""Load cases and their combinations as columns of one matrix of factors.

The analysis is linear: displacements, stress components, reactions and temperature changes of a
combination are sums of those of its cases. Von Mises and principal stresses are not, and are
formed afterwards.
"""

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from workers.job import Job

Array = NDArray[np.float64]
Kind = Literal["case", "combination"]


@dataclass(frozen=True, eq=False)
class States:
    """All load cases, then all combinations.

    names, kinds : one for each of the s states
    factors : (c, s) array   how much of each case a state holds
    """

    names: tuple[str, ...]
    kinds: tuple[Kind, ...]
    factors: Array

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


def load_states(job: Job) -> States:
    """The states of a job, in the order of the document."""
    cases = tuple(case.name for case in job.load_cases)
    row = {name: number for number, name in enumerate(cases)}
    factors = np.zeros((len(cases), len(cases) + len(job.combinations)))
    factors[:, : len(cases)] = np.eye(len(cases))
    for number, combination in enumerate(job.combinations, start=len(cases)):
        for name, factor in combination.factors.items():
            factors[row[name], number] = factor
    names = cases + tuple(combination.name for combination in job.combinations)
    kinds: tuple[Kind, ...] = tuple("case" for _ in cases)
    return States(names, kinds + tuple("combination" for _ in job.combinations), factors)


def superpose(values: Array, states: States, columns: range) -> Array:
    """Sum the cases of some states, (..., c) -> (..., k), in memory of its own."""
    factors = states.factors[:, columns.start : columns.stop]
    if all(states.kinds[column] == "case" for column in columns):
        return np.ascontiguousarray(values[..., columns.start : columns.stop])
    used = np.flatnonzero(factors.any(axis=1))
    return np.matmul(values[..., used], factors[used])


def superpose_blocks(
    values: tuple[Array, ...] | None, states: States, columns: range
) -> tuple[Array, ...] | None:
    """The same for one array per block of the mesh, or none."""
    return None if values is None else tuple(superpose(v, states, columns) for v in values)
