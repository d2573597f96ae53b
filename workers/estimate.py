"""What a job will cost: unknowns, entries of the factor, memory and processor time.

Formulas with coefficients that were measured on this program; nothing is solved. NumPy only, so
that whoever has a mesh can ask, the web process included.

Measured were 22 jobs on mapped patches, T3, T6, Q4 and Q8, 2 500 to 350 000 unknowns, 1 to 300 load
cases, up to 100 combinations, with and without pictures, each in a fresh process with one BLAS
thread. The coefficients are the non-negative least-squares fit of the relative errors. Those of
reviewing, writing and drawing, and what every stage takes beside its mesh, were fitted anew to nine
jobs of 960 to 136 000 unknowns in forks of a warm process, as work-horses are: peaks of memory come
out 0.96 to 1.22 times the true ones, processor times 0.8 to 1.2 times (`tests/measure_cost.py`).
"""

import time
from collections.abc import Callable, Iterable, Mapping
from dataclasses import dataclass, replace
from types import MappingProxyType
from typing import Any

import numpy as np
from numpy.typing import NDArray

from elements.contract import ElementType
from workers.analysis.memory_need import direct_memory, iterative_memory
from workers.analysis.mesh import Mesh

# Entries of the factor over n log2(n), n unknowns (the growth of nested dissection in the plane:
# George 1973), by corners and order of the elements. Measured on square plates, which have the
# longest separators: Q8 9.7 to 10.0, Q4 7.9 to 8.3, T6 5.7 to 6.3, T3 6.5 to 7.1.
ENTRIES: Mapping[tuple[int, int], float] = MappingProxyType(
    {(3, 1): 7.1, (3, 2): 6.2, (4, 1): 8.3, (4, 2): 10.0}
)
# Multiplications of the factorisation for each of its entries, by sqrt(n): 0.83 to
# 1.4 times the count for all four elements.
WORK_PER_ENTRY, WORK_GROWTH = 90.0, 0.35

# How many states the analysis takes at once: `summary.CHUNK_BYTES`, `solution.BLOCK_BYTES`.
CHUNK_BYTES, BLOCK_BYTES = 200e6, 1 << 26
LEAST_AT_ONCE = 8

BASIS = (
    "Formulas fitted to measured jobs; expect the true memory within a quarter and the true time "
    "within a factor of two on an idle processor. Curved and graded meshes need rather less."
)


@dataclass(frozen=True)
class FactorSize:
    """Numbers in the Cholesky factor, and multiplications that make it.

    counted : from the fronts of this very mesh, not from a formula.
    """

    entries: float
    work: float
    counted: bool


def counted_factor(own: NDArray[np.int64], border: NDArray[np.int64]) -> FactorSize:
    """The factor of fronts that eliminate `own` unknowns each and border on `border`, (s,)."""
    k, b = own.astype(float), border.astype(float)
    entries = (k * (k + 1) / 2 + k * b).sum()
    work = (k**3 / 3 + k * k * b + k * b * b).sum()
    return FactorSize(float(entries), float(work), counted=True)


def fitted_factor(mesh: Mesh) -> FactorSize:
    """The factor that a mesh of this size has, by its most costly kind of element."""
    return _fitted(mesh.dof_count, [block.element for block in mesh.blocks])


def _fitted(dofs: float, elements: Iterable[ElementType]) -> FactorSize:
    n = float(dofs)
    most = max(ENTRIES.values())
    entries = max(ENTRIES.get((e.corners, e.order), most) for e in elements) * n * np.log2(n)
    work = entries * (WORK_PER_ENTRY + WORK_GROWTH * np.sqrt(n))
    return FactorSize(float(entries), float(work), counted=False)


@dataclass(frozen=True)
class Workload:
    """What the cost of a job depends on.

    corners : nodes that are corners of elements.
    cases : load cases, for which equations are solved.
    states : cases and combinations, for which stresses are recovered.
    fields, pictures : files that are made with the job.
    """

    nodes: int
    corners: int
    elements: int
    factor: FactorSize
    cases: int
    states: int
    fields: int
    pictures: int

    @property
    def dofs(self) -> int:
        return 2 * self.nodes


def workload(
    mesh: Mesh, factor: FactorSize, *, cases: int, states: int, fields: int, pictures: int
) -> Workload:
    """The work of a job on its mesh."""
    is_corner = np.zeros(mesh.node_count, dtype=bool)
    for block in mesh.blocks:
        is_corner[block.connectivity[:, : block.element.corners]] = True
    return Workload(
        nodes=mesh.node_count,
        corners=int(is_corner.sum()),
        elements=mesh.element_count,
        factor=factor,
        cases=cases,
        states=states,
        fields=fields,
        pictures=pictures,
    )


def expected_workload(
    element: ElementType, elements: float, *, cases: int, states: int, pictures: int
) -> Workload:
    """The work of a job whose mesh is still to be made, of about so many elements."""
    corners = elements * (0.5 if element.is_triangle else 1.0)  # Euler: V - E + F = 1, V large
    sides = elements * element.corners / 2
    nodes = max(round(corners + (sides if element.order == 2 else 0)), 4)
    factor = _fitted(2 * nodes, [element])
    return Workload(nodes, round(corners), round(elements), factor, cases, states, states, pictures)


def finer(load: Workload, dofs: int) -> Workload:
    """The same job on a mesh of so many unknowns."""
    times = dofs / load.dofs
    logarithms = np.log2(dofs) / np.log2(load.dofs)
    return replace(
        load,
        nodes=round(load.nodes * times),
        corners=round(load.corners * times),
        elements=round(load.elements * times),
        factor=FactorSize(
            float(load.factor.entries * times * logarithms),
            float(load.factor.work * times**1.5),
            counted=False,
        ),
    )


def memory_by_stage(load: Workload) -> dict[str, float]:
    """Peak memory in each stage beyond that of the resting worker [bytes]."""
    n, entries = load.dofs, load.factor.entries
    displacements = 8.0 * n * load.cases
    block = 8.0 * n * min(load.cases, max(LEAST_AT_ONCE, BLOCK_BYTES / (8 * n)))
    # Five measures at nodes, displacements and three stresses, of the states that fit a chunk.
    chunk = min(CHUNK_BYTES, 48.0 * n * load.states)
    stages = {
        "factorising": direct_memory(n, entries),
        "solving": 19e6 + 780 * n + 10.6 * entries + 1.5 * displacements + 1.6 * block,
        "recovering": 20e6 + 1440 * n + 3.9 * entries + 0.5 * displacements + 1.4 * chunk,
        "writing": 30e6 + 700 * n + 3.9 * entries + 0.9 * displacements,
    }
    if load.pictures:  # the first picture loads what draws it: a quarter of a GB whatever the mesh
        stages["drawing"] = 262e6 + 9.5 * entries + 0.9 * displacements
    return stages


def memory_by_iteration(load: Workload) -> dict[str, float]:
    """The same without a factor, where conjugate gradients take its place [bytes]."""
    stages = memory_by_stage(replace(load, factor=FactorSize(0.0, 0.0, counted=False)))
    levels = iterative_memory(load.dofs)
    return {**stages, "factorising": levels, "solving": max(levels, stages["solving"])}


def time_by_stage(load: Workload) -> dict[str, float]:
    """Processor time of each stage after meshing on the machine that was measured [s]."""
    n, entries = load.dofs, load.factor.entries
    middles = load.nodes - load.corners
    return {
        "assembling": 0.010 + 11.4e-6 * load.corners + 5.7e-6 * middles + 10e-9 * n * load.cases,
        "factorising": 0.008 + 1.2e-10 * load.factor.work + 2.6e-6 * n,
        "solving": 7.7e-9 * entries + (0.43e-9 * entries + 18e-9 * n) * load.cases,
        "recovering": (
            0.030 + 5.4e-6 * load.nodes + 5.1e-6 * load.elements + 0.17e-6 * n * load.states
        ),
        "reviewing": 0.015 + 1.1e-6 * n + 0.8e-3 * load.states,
        # Tables and sheet; field files, that of the envelope among them.
        "writing": 0.010 + load.fields * (1.5e-3 + 0.28e-6 * n + 0.97e-6 * load.elements),
        # The first picture loads what draws it.
        "drawing": 0.5 * (load.pictures > 0) + load.pictures * (0.33 + 1.8e-6 * n),
    }


@dataclass(frozen=True)
class Estimate:
    """What a job will cost.

    memory : by stage, beyond the resting worker [bytes].
    seconds : by stage, of one idle processor of this machine.
    slowness : of this machine, 1 where the coefficients were measured.
    finest : of the finest mesh that is allowed, for a job that is solved on finer and finer ones;
        None for a job that is solved on its own mesh.
    """

    load: Workload
    memory: Mapping[str, float]
    seconds: Mapping[str, float]
    slowness: float
    finest: "Estimate | None" = None

    @property
    def peak_memory(self) -> int:
        return round(max(self.memory.values()))

    @property
    def total_seconds(self) -> float:
        return sum(self.seconds.values())

    def as_json(self) -> dict[str, Any]:
        return {
            "dofs": self.load.dofs,
            "factor_entries": round(self.load.factor.entries),
            "factor_counted": self.load.factor.counted,
            "memory": {
                "bytes": self.peak_memory,
                "by_stage": {stage: round(size) for stage, size in self.memory.items()},
            },
            "time": {
                "seconds": round(self.total_seconds, 3),
                "by_stage": {stage: round(time, 3) for stage, time in self.seconds.items()},
                "machine": round(self.slowness, 2),
            },
            "finest": self.finest
            and {
                "dofs": self.finest.load.dofs,
                "bytes": self.finest.peak_memory,
                "seconds": round(self.finest.total_seconds, 3),
            },
            "basis": BASIS,
        }


def estimate(
    load: Workload, slowness: float, before: Mapping[str, float], most_dofs: int | None = None
) -> Estimate:
    """Cost of a job.

    before : seconds that reading and meshing took, measured by whoever has done them
    most_dofs : for a job that is solved on finer meshes as well: unknowns of the finest allowed
    """
    seconds = {stage: slowness * time for stage, time in time_by_stage(load).items()}
    finest = None
    if most_dofs is not None:
        growth = max(1.0, most_dofs / load.dofs)
        meshing = {stage: growth * time for stage, time in before.items()}
        finest = estimate(finer(load, max(most_dofs, load.dofs)), slowness, meshing)
    return Estimate(load, memory_by_stage(load), {**before, **seconds}, slowness, finest)


# --- the speed of this machine -------------------------------------------------------------------

# Processor time of the three trials below on the machine of the measurements [s].
TRIALS_THERE = (0.765e-3, 0.357e-3, 1.40e-3)
REPEATS = 15  # the fastest counts: whatever disturbs a trial makes it slower


def measure_slowness() -> float:
    """Processor time of this machine over that of the machine that was measured.

    The mean of three trials that stand for what a job does: dense products, adding to scattered
    places, plain Python. Takes 40 ms. Run it with one BLAS thread.
    """
    chance = np.random.default_rng(0)
    dense = chance.standard_normal((256, 256))
    places, values = chance.permutation(1 << 17), chance.standard_normal(1 << 17)
    trials: tuple[Callable[[], object], ...] = (
        lambda: dense @ dense,
        lambda: np.add.at(np.zeros(1 << 17), places, values),
        lambda: sum(i * i for i in range(30_000)),
    )
    ratios = [_fastest(trial) / there for trial, there in zip(trials, TRIALS_THERE, strict=True)]
    return float(np.exp(np.mean(np.log(ratios))))


def _fastest(trial: Callable[[], object]) -> float:
    times = []
    for _ in range(REPEATS):
        start = time.process_time()
        trial()
        times.append(time.process_time() - start)
    return min(times)
