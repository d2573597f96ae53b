"""The client's own mesh, its sides found by selectors, from the document to the stresses."""

import numpy as np
import orjson
import pytest

from tests.exact_solutions import lame
from tests.large_documents import large_document
from tests.outlines import STEEL, Json, Solved, document, solved
from tests.plates import ELEMENTS, MIXED, grid, ring
from workers.analysis.mesh import Mesh
from workers.document.read import read_document
from workers.errors import DocumentError, FaultyError
from workers.preflight import preflight

E, NU = STEEL["youngs_modulus"], STEEL["poissons_ratio"]
every_mesh = pytest.mark.parametrize("kind", ELEMENTS + MIXED)


def _geometry(mesh: Mesh, **more: Json) -> Json:
    """Nodes and blocks only: no side has a name."""
    blocks = [{"element": b.element.name, "connectivity": b.connectivity} for b in mesh.blocks]
    return {"mesh": {"nodes": mesh.nodes, "blocks": blocks, **more}}


def _segment(*ends: float) -> Json:
    return {"segment": [ends[:2], ends[2:]]}


@every_mesh
@pytest.mark.parametrize("way", ["segments", "boxes", "nodes"])
def test_a_bar_between_selected_sides_is_in_plain_tension(kind: str, way: str) -> None:
    """sigma = 7 along a bar that is free to narrow: u = sigma x / E, v = -nu sigma y / E."""
    mesh = grid(kind, 6, 3, size=(4.0, 1.0), shuffle=3)
    left, right, base = (
        {"segments": _segment(*line), "boxes": {"box": [line[:2], line[2:]]},
         "nodes": {"nodes": np.flatnonzero(on).tolist()}}[way]
        for line, on in (
            ((0, 0, 0, 1), mesh.nodes[:, 0] == 0),
            ((4, 1, 4, 0), mesh.nodes[:, 0] == 4),
            ((0, 0, 4, 0), mesh.nodes[:, 1] == 0),
        )
    )  # fmt: skip
    plate = solved(
        document(
            _geometry(mesh),
            [{"on": left, "normal": 0}, {"on": base, "uy": 0}],
            [{"on": right, "pressure": -7}],
        )
    )
    expected = 7 / E * mesh.nodes * [1, -NU]
    np.testing.assert_allclose(plate.displacement, expected, atol=1e-9 * np.abs(expected).max())


@pytest.mark.parametrize(
    ("kind", "tolerance"),
    [("T3", 0.02), ("Q4", 0.02), ("T6", 2e-3), ("Q8", 2e-3), ("T6+Q8", 2e-3)],
)
def test_a_ring_is_loaded_and_held_on_circles(kind: str, tolerance: float) -> None:
    """Pressure on the circle of the bore; the whole rim stands on the springs that the rest of an
    infinite plate would be, p_o = k u: Lame twice, T&G art. 28."""
    a, b, p, k = 10.0, 20.0, 60.0, 9000.0
    mesh = ring(kind, 48, 12, a, b)
    circle = {"centre": [0, 0], "radius": b}
    plate = solved(
        document(
            _geometry(mesh),
            [{"on": {"circle": circle}, "spring": {"normal": k, "tangential": 1.0}}],
            [{"on": {"circle": {"centre": [0, 0], "radius": a}}, "pressure": p}],
        )
    )
    # u = A r + B / r with sigma_r(a) = -p and sigma_r(b) = -k u(b), thickness 1.
    law = E / (1 - NU**2)

    def radial(r: float) -> np.ndarray:
        return law * np.array([1 + NU, -(1 - NU) / r**2])

    A, B = np.linalg.solve([radial(a), radial(b) + k * np.array([b, 1 / b])], [-p, 0])
    for r in (a, b):
        nodes = np.isclose(np.linalg.norm(mesh.nodes, axis=1), r)
        moved = (plate.displacement[nodes] * mesh.nodes[nodes]).sum(axis=1) / r
        np.testing.assert_allclose(moved, A * r + B / r, rtol=tolerance)
    free = lame(E, NU, a, b, p).displacement(np.array(a), np.array(0.0))[0]
    assert A * a + B / a < 0.9 * free  # the springs are felt


@pytest.mark.parametrize("kind", ["Q8", "T6", "T6+Q8", "Q4"])
def test_a_selected_circle_bears_a_pin_as_a_hole_does(kind: str) -> None:
    """The force comes to a billionth, and about the centre there is no moment."""
    mesh = ring(kind, 22, 3, 10.0, 25.0)
    plate = solved(
        document(
            _geometry(mesh),
            [{"on": {"circle": {"centre": [0, 0], "radius": 25}}, "ux": 0, "uy": 0}],
            [{"on": {"circle": {"centre": [0, 0], "radius": 10}}, "bearing": [300, -400]}],
        )
    )
    np.testing.assert_allclose(plate.applied(), [300, -400, 0], atol=1e-9 * 500)
    np.testing.assert_allclose(plate.reactions(), [-300, 400, 0], atol=1e-8 * 500)


def _large(mixed: bool) -> Solved:
    return solved(orjson.loads(large_document(12, mixed=mixed)))


@pytest.mark.parametrize("mixed", [False, True])
def test_the_mesh_of_the_benchmark_is_a_plate_in_tension(mixed: bool) -> None:
    """Reaction and mean stretch of a plate of 1000 by 1000 by 10 under 10 per area."""
    plate = _large(mixed)
    np.testing.assert_allclose(plate.reactions()[:2], [-1e5, 0], atol=1e-4)
    right = plate.mesh.nodes[:, 0] == 1000
    assert plate.displacement[right, 0].mean() == pytest.approx(10 / E * 1000, rel=0.03)


def test_a_segment_that_ends_inside_an_element_is_a_fault() -> None:
    mesh = grid("Q8", 6, 3, size=(4.0, 1.0))
    with pytest.raises(FaultyError, match="ends inside the element side") as caught:
        solved(
            document(
                _geometry(mesh),
                [{"on": _segment(0, 0, 0, 1), "ux": 0, "uy": 0}],
                [{"on": _segment(4, 0, 4, 0.9), "pressure": 1}],
            )
        )
    assert caught.value.faults[0].pointer == "/load_cases/load/0/on"


@pytest.mark.parametrize(
    ("radius", "load", "words"),
    [
        (25, {"bearing": [1, 0]}, "bulges outwards"),
        (10, {"total_moment": 5}, "straight side"),
    ],
)
def test_a_load_on_the_wrong_kind_of_side_is_known_before_solving(
    radius: float, load: Json, words: str
) -> None:
    """A fault of the document, which the API answers at once, not of a job that ran."""
    circles = [{"circle": {"centre": [0, 0], "radius": r}} for r in (10, 25)]
    job = read_document(
        orjson.dumps(
            document(
                _geometry(ring("Q8", 22, 3, 10.0, 25.0)),
                [{"on": on, "ux": 0, "uy": 0} for on in circles],
                [{"on": {"circle": {"centre": [0, 0], "radius": radius}}, **load}],
            ),
            option=orjson.OPT_SERIALIZE_NUMPY,
        )
    )
    with pytest.raises(DocumentError, match=words) as caught:
        preflight(job)
    assert [fault.pointer for fault in caught.value.faults] == ["/load_cases/load/0/on"]
