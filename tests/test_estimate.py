"""The estimate of what a job costs, against what such jobs did cost. Ratios only."""

import json
import subprocess
import sys
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from scipy.sparse import csr_array, eye_array, kron
from scipy.sparse.linalg import splu

from tests.job_documents import strip
from tests.measuring import CHILD_ENVIRONMENT
from tests.plates import ELEMENTS, grid
from workers.analysis import solution, summary
from workers.analysis.assembly import NodePairs
from workers.analysis.multifrontal.symbolic import analyse
from workers.estimate import (
    BLOCK_BYTES,
    CHUNK_BYTES,
    FactorSize,
    Workload,
    counted_factor,
    estimate,
    finer,
    fitted_factor,
    measure_slowness,
    memory_by_stage,
    time_by_stage,
    workload,
)
from workers.outputs import preview

CHILD = Path(__file__).with_name("measure_cost.py")
LOAD = Workload(1000, 400, 333, FactorSize(1e5, 1e7, True), 3, 5, 5, 2)


def counted(mesh: Any) -> FactorSize:
    fronts = analyse(mesh).fronts
    return counted_factor(2 * np.diff(fronts.first), 2 * np.diff(fronts.border_first))


# --- the factor ----------------------------------------------------------------------------------


def test_a_dense_factor_is_a_triangle_that_takes_a_third_of_a_cube() -> None:
    """One front without border: n (n + 1) / 2 entries, n^3 / 3 multiplications (Golub & Van Loan,
    Matrix Computations, section 4.2)."""
    factor = counted_factor(np.array([100]), np.array([0]))
    assert factor.entries == 5050
    assert factor.work == pytest.approx(100**3 / 3)


def test_a_chain_of_fronts_adds_up() -> None:
    """Two unknowns that see two later ones, which see none, by hand: 3 + 2 x 2 and 3 entries."""
    factor = counted_factor(np.array([2, 2]), np.array([2, 0]))
    assert factor.entries == 3 + 4 + 3


@pytest.mark.parametrize("element", ELEMENTS)
def test_the_counted_entries_are_about_those_of_another_solver(element: str) -> None:
    """SuperLU in the same order stores L without the zeros that joined small fronts hold, on this
    mesh up to as many again."""
    mesh = grid(element, 60, 60)
    order = analyse(mesh).order
    pairs = NodePairs.build(
        [order.position[block.connectivity] for block in mesh.blocks], mesh.node_count
    )
    # Any values will do that need no pivoting: a strong diagonal.
    nodes = csr_array((-np.ones(len(pairs.indices)), pairs.indices, pairs.indptr))
    dofs = kron(nodes, np.ones((2, 2))) + 100 * eye_array(mesh.dof_count)
    lu = splu(
        dofs.tocsc(),
        permc_spec="NATURAL",
        diag_pivot_thresh=0.0,
        options={"SymmetricMode": True},
    )
    assert 1.0 <= counted(mesh).entries / lu.L.nnz < 2.0


@pytest.mark.parametrize("element", ELEMENTS)
@pytest.mark.parametrize("cells", [20, 60])
def test_the_formula_for_the_factor_is_near_the_count(element: str, cells: int) -> None:
    mesh = grid(element, cells, cells)
    formula, count = fitted_factor(mesh), counted(mesh)
    assert not formula.counted
    assert 0.8 < formula.entries / count.entries < 1.25
    assert 0.5 < formula.work / count.work < 2.0


def test_a_mixed_mesh_counts_as_its_most_costly_element() -> None:
    mixed, plain = grid("T6+Q8", 10, 10), grid("Q8", 10, 10)
    n = [mesh.dof_count * np.log2(mesh.dof_count) for mesh in (mixed, plain)]
    assert fitted_factor(mixed).entries / n[0] == pytest.approx(fitted_factor(plain).entries / n[1])


# --- the work ------------------------------------------------------------------------------------


def test_the_work_counts_nodes_corners_and_what_will_be_written() -> None:
    """4 x 3 cells of Q8: 5 x 4 corners, 31 mid-sides."""
    load = workload(
        grid("Q8", 4, 3), FactorSize(1.0, 1.0, True), cases=2, states=3, fields=4, pictures=6
    )
    assert (load.nodes, load.corners, load.elements) == (51, 20, 12)
    assert (load.dofs, load.fields, load.pictures) == (102, 4, 6)


@pytest.mark.parametrize("what", ["nodes", "cases", "states", "pictures"])
def test_more_work_never_costs_less(what: str) -> None:
    more = replace(LOAD, **{what: 10 * getattr(LOAD, what)})
    assert sum(time_by_stage(more).values()) > sum(time_by_stage(LOAD).values())
    before, after = memory_by_stage(LOAD), memory_by_stage(more)
    assert all(after[stage] >= before[stage] for stage in before)


def test_a_slower_machine_takes_longer_but_not_for_what_was_measured_on_it() -> None:
    fast = estimate(LOAD, 1.0, {"meshing": 5.0})
    slow = estimate(LOAD, 3.0, {"meshing": 5.0})
    assert slow.total_seconds - 5.0 == pytest.approx(3 * (fast.total_seconds - 5.0))
    assert slow.peak_memory == fast.peak_memory


def test_without_pictures_nothing_is_loaded_that_draws() -> None:
    assert "drawing" not in memory_by_stage(replace(LOAD, pictures=0))
    assert time_by_stage(replace(LOAD, pictures=0))["drawing"] == 0.0


def test_the_estimate_knows_how_much_the_analysis_takes_at_once() -> None:
    assert (CHUNK_BYTES, BLOCK_BYTES) == (summary.CHUNK_BYTES, solution.BLOCK_BYTES)


@pytest.mark.parametrize("element", ELEMENTS)
def test_a_finer_mesh_costs_what_such_a_mesh_costs(element: str) -> None:
    """Scaled from 20 x 20 cells against 60 x 60 cells themselves."""

    def of(cells: int) -> Workload:
        mesh = grid(element, cells, cells)
        return workload(mesh, counted(mesh), cases=3, states=5, fields=1, pictures=0)

    true = of(60)
    scaled = finer(of(20), true.dofs)
    assert scaled.elements == pytest.approx(true.elements, rel=0.1)
    assert scaled.factor.entries == pytest.approx(true.factor.entries, rel=0.3)
    memory, seconds = (
        (max(memory_by_stage(w).values()) for w in (scaled, true)),
        (sum(time_by_stage(w).values()) for w in (scaled, true)),
    )
    for scaled_cost, true_cost in (memory, seconds):
        assert scaled_cost == pytest.approx(true_cost, rel=0.5)


def test_a_machine_is_about_as_fast_as_itself() -> None:
    """Within what else runs on it: a shared core can be half as fast for a while."""
    first, second = measure_slowness(), measure_slowness()
    assert first > 0.0
    assert 1 / 3 < first / second < 3


# --- against real jobs ---------------------------------------------------------------------------


def panel(element: str, cells: int, cases: int) -> dict[str, Any]:
    document = strip(length=1000.0, height=1000.0)
    document["geometry"]["patches"][0]["divisions"] = [cells, cells]
    document["meshing"] = {"element": element}
    document["load_cases"] = {
        f"wave {n}": [
            {"on": "right", "total_force": [1e3 * n, 500.0]},
            {"on": "high", "pressure": n},
        ]
        for n in range(1, cases + 1)
    }
    document["combinations"] = {"seaway": {"wave 1": 1.5, f"wave {cases}": 1.2}}
    return document


def bored_plate() -> dict[str, Any]:
    """An outline, which the mesher has to mesh."""
    document = strip()
    document["geometry"] = {
        "outline": [
            {"at": [0, 0], "side": "low"}, {"at": [300, 0], "side": "right"},
            {"at": [300, 200], "side": "high"}, {"at": [0, 200], "side": "left"},
        ],
        "holes": [{"name": "eye", "circle": {"centre": [200, 100], "radius": 30}}],
        "points": {"corner": [0, 0]},
    }  # fmt: skip
    document["meshing"] = {"element": "T6", "size": 4, "sizes": {"eye": 2}}
    return document


JOBS = {
    "small": (panel("Q8", 12, 2), 0),
    "quadrilaterals": (panel("Q8", 60, 40), 0),
    "triangles": (panel("T3", 110, 5), 0),
    "outline": (bored_plate(), 0),
    "pictures": (panel("Q4", 40, 3), 3),
}


@pytest.mark.slow
@pytest.mark.parametrize("name", JOBS)
def test_jobs_cost_what_was_estimated_within_a_factor_of_two(name: str, tmp_path: Path) -> None:
    """Processor time against processor time on the same machine, so that its speed and what else
    runs on it matter little."""
    document, pictures = JOBS[name]
    if pictures and (reason := preview.probe()):
        pytest.skip(reason)
    path = tmp_path / "job.json"
    path.write_text(json.dumps(document))
    done = subprocess.run(
        [sys.executable, CHILD, path, str(pictures)],
        check=False, capture_output=True, text=True, env=CHILD_ENVIRONMENT,
    )  # fmt: skip
    assert done.returncode == 0, done.stderr
    measured = json.loads(done.stdout)
    time = measured["estimated seconds"] / measured["seconds"]
    memory = measured["estimated memory"] / measured["memory"]
    print(f"\n{name}: estimated over true time {time:.2f}, memory {memory:.2f}; {measured}")
    assert 0.5 < time < 2.0
    assert 0.5 < memory < 2.0
