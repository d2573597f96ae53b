"""The solution of all load cases: displacements, loads, the forces of the supports.

`solve` runs the stages one after another: order the nodes, assemble, factorise once, solve all
cases as blocks of right-hand sides, check the residual, collect the forces of the supports.
"""

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workers.analysis.model import Model

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class SupportForces:
    """What one support does to the plate.

    label : key of the support in the results.
    nodes : (k,) node numbers.
    force : (k, 2, c) force of the support on the plate at each node, springs included [F]. A
        node that several supports hold counts once: its force is split between them.
    """

    label: str
    nodes: NDArray[np.int64]
    force: Array


@dataclass(frozen=True, eq=False)
class SolverReport:
    """How the system was solved, and how well.

    residual : (c,) norm of the forces left out of balance over the norm of the load, by case.
    reciprocal_condition : estimate for the matrix scaled to a unit diagonal; near 1e-16 the plate
        is as good as free to move.
    seconds : wall time by stage.
    """

    name: str
    ordering: str
    dofs: int
    free_dofs: int
    factor_entries: int
    residual: Array
    refinements: int
    reciprocal_condition: float
    seconds: Mapping[str, float]


@dataclass(frozen=True, eq=False)
class Solution:
    """All load cases of a model.

    cases : names, in the order of the last axis.
    displacement : (N, 2, c) global axes [L].
    applied : (N, 2, c) nodal forces of the mechanical loads, temperature excluded [F].
    support_forces : one for each support, in the job's order.
    temperature : for each block (m, c) temperature change [K]; None if no case has one.
    """

    model: Model
    cases: tuple[str, ...]
    displacement: Array
    applied: Array
    support_forces: tuple[SupportForces, ...]
    temperature: tuple[Array, ...] | None
    solver: SolverReport
