"""Properties of results on random plates: they balance, turn, mirror and change units.

What is compared
- balance: the sum of support forces, against the sum of loads, in x, y and moment, over the sum of
  the magnitudes;
- rotation and mirroring: the mesh itself is turned or mirrored (the mesher's boxes are upright, so
  that a turned drawing would get another mesh), and all node displacements are compared with the
  turned or mirrored ones, over the largest;
- units: the document is written in another unit of length and meshed anew; all node places,
  displacements and support forces are compared.
A pressure on all sides that are not held turns with the plate by itself.
"""

from collections.abc import Callable
from dataclasses import replace
from random import Random
from typing import Any

import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from tests.random_plates import random_plate, scaled
from workers.analysis.mesh import Block, Mesh
from workers.analysis.meshing.build import mesh_job
from workers.analysis.solution import Solution, solve
from workers.document.read import load
from workers.job import Job

pytestmark = pytest.mark.slow

TOLERANCE = 1e-8
MIRRORED = {  # node order of each type seen in a mirror
    "T3": [0, 2, 1],
    "T6": [0, 2, 1, 5, 4, 3],
    "Q4": [0, 3, 2, 1],
    "Q8": [0, 3, 2, 1, 7, 6, 5, 4],
}
slowly = settings(
    max_examples=20, deadline=None, suppress_health_check=[HealthCheck.too_slow], print_blob=True
)
plates = st.randoms(use_true_random=False)
elements = st.sampled_from(["T3", "T6", "Q4", "Q8"])


def job_on(geometry: dict[str, Any], element: str, factor: float = 1.0) -> Job:
    """Held on its first side, under pressure on the second and in the holes, and of some weight.

    factor : millimetres to the unit of length
    """
    outline = [dict(vertex) for vertex in geometry["outline"]]
    outline[0]["side"], outline[1]["side"] = "held", "pressed"
    holes = [{"on": hole["name"], "pressure": 20 * factor**2} for hole in geometry["holes"]]
    size = 5.0 / factor
    document = {
        "title": "random plate",
        "units": {"length": "mm", "force": "N"},
        "materials": {"steel": {"youngs_modulus": 210e3 * factor**2, "poissons_ratio": 0.3}},
        "geometry": {**scaled(geometry, 1 / factor), "outline": scaled(outline, 1 / factor)},
        "plate": {"material": "steel", "thickness": 10 / factor},
        "meshing": {"element": element, "size": size},
        "supports": [{"on": "held", "ux": 0, "uy": 0}],
        "load_cases": {
            "push": [{"on": "pressed", "pressure": {"from": 0, "to": 100 * factor**2}}, *holes]
        },
    }
    return load(document)


def displacements(job: Job, mesh: Mesh) -> np.ndarray:
    return np.asarray(solve(job, mesh).displacement[:, :, 0])


def support_forces(solution: Solution) -> tuple[np.ndarray, np.ndarray]:
    """Nodes (k,) and the forces of the supports on them (k, 2)."""
    forces = solution.support_forces
    return (
        np.concatenate([held.nodes for held in forces]),
        np.concatenate([held.force[:, :, 0] for held in forces]),
    )


@slowly
@given(plates, elements)
def test_random_plates_balance(random: Random, element: str) -> None:
    job = job_on(random_plate(random), element)
    mesh = mesh_job(job)
    solution = solve(job, mesh)
    nodes, reaction = support_forces(solution)
    applied = solution.applied[:, :, 0]
    assert np.abs(applied).max() > 0
    lever = mesh.nodes - mesh.nodes.mean(axis=0)
    scale = np.abs(applied).sum() + np.abs(reaction).sum()
    assert np.abs(applied.sum(axis=0) + reaction.sum(axis=0)).max() < TOLERANCE * scale
    moments = _moment(lever, applied) + _moment(lever[nodes], reaction)
    assert abs(moments) < TOLERANCE * scale * mesh.diagonal


def _moment(lever: np.ndarray, force: np.ndarray) -> float:
    return float((lever[:, 0] * force[:, 1] - lever[:, 1] * force[:, 0]).sum())


@slowly
@given(plates, elements, st.floats(-180, 180))
def test_results_turn_with_the_plate(random: Random, element: str, degrees: float) -> None:
    job = job_on(random_plate(random), element)
    mesh = mesh_job(job)
    c, s = np.cos(np.radians(degrees)), np.sin(np.radians(degrees))
    turn = np.array([[c, -s], [s, c]])
    assert_moved(job, mesh, replace(mesh, nodes=mesh.nodes @ turn.T), lambda u: u @ turn.T)


@slowly
@given(plates, elements)
def test_results_are_mirrored_with_the_plate(random: Random, element: str) -> None:
    """Elements and sides run the other way round in a mirror; a linear load keeps its ends."""
    job = job_on(random_plate(random), element)
    loads = job.load_cases[0].loads
    even = [replace(load, start=100.0, end=100.0) for load in loads]
    job = replace(job, load_cases=(replace(job.load_cases[0], loads=tuple(even)),))
    mesh = mesh_job(job)
    flip = np.array([-1.0, 1.0])
    assert_moved(job, mesh, mirrored(mesh), lambda u: u * flip)


def mirrored(mesh: Mesh) -> Mesh:
    blocks = tuple(
        Block(b.element, b.connectivity[:, MIRRORED[b.element.name]], b.region) for b in mesh.blocks
    )
    image = Mesh(mesh.nodes * [-1.0, 1.0], blocks, mesh.regions, points=mesh.points)
    sides = {n: image.find_facets(mesh.facet_ends(f)[:, ::-1]) for n, f in mesh.sides.items()}
    return replace(image, sides=sides)


def assert_moved(
    job: Job, mesh: Mesh, moved: Mesh, move: Callable[[np.ndarray], np.ndarray]
) -> None:
    expected = move(displacements(job, mesh))
    found = displacements(job, moved)
    assert np.abs(found - expected).max() < TOLERANCE * np.abs(expected).max()


@slowly
@given(plates, elements, st.sampled_from([25.4, 1000.0, 304.8, 1 / 3]))
def test_results_do_not_depend_on_the_unit_of_length(
    random: Random, element: str, factor: float
) -> None:
    """Meshed anew in the other unit. With forces in N, stresses grow with the factor squared."""
    geometry = random_plate(random)
    one, other = job_on(geometry, element), job_on(geometry, element, factor)
    mesh, again = mesh_job(one), mesh_job(other)
    for a, b in zip(mesh.blocks, again.blocks, strict=True):
        np.testing.assert_array_equal(a.connectivity, b.connectivity)
    assert np.abs(again.nodes * factor - mesh.nodes).max() < 1e-9 * mesh.diagonal
    first, second = solve(one, mesh), solve(other, again)
    u, v = first.displacement, second.displacement * factor
    assert np.abs(u - v).max() < TOLERANCE * np.abs(u).max()
    (_, p), (_, q) = support_forces(first), support_forces(second)
    assert np.abs(p - q).max() < TOLERANCE * np.abs(p).max()
