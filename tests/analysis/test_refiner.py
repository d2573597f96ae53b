"""Finer meshes: patches stay conforming and keep their nodes, outlines follow the sizes asked."""

import numpy as np
import orjson
import pytest

from tests.outlines import document
from workers.analysis.mesh import Mesh
from workers.analysis.meshing.size_field import element_areas, element_sizes
from workers.analysis.refiner import Refiner, refiner
from workers.document.read import read_document

ELEMENTS = ("T3", "Q4", "T6", "Q8")
HOLD = [{"on": "left", "ux": 0, "uy": 0}]
LOAD = [{"on": "right", "traction": [1, 0]}]


def patches(element: str = "Q8") -> Refiner:
    """Three patches in an L: the lower two share the strip across, the left two that along."""

    def patch(name: str, x: float, y: float, divisions: list[int], sides: list) -> dict:
        corners = [[x, y], [x + 1, y], [x + 1, y + 1], [x, y + 1]]
        return {"name": name, "corners": corners, "divisions": divisions, "sides": sides,
                "grading": [2, 1] if x else [1, 1]}  # fmt: skip

    geometry = {
        "patches": [
            patch("one", 0, 0, [2, 3], [None, None, None, "left"]),
            patch("two", 1, 0, [4, 3], [None, "right", None, None]),
            patch("three", 0, 1, [2, 5], [None, None, None, None]),
        ],
        "points": {"middle": [0.5, 0]},
    }
    return _refiner(document(geometry, HOLD, LOAD, element=element))


def square(element: str, size: float = 0.25) -> Refiner:
    corners = [{"at": [0, 0]}, {"at": [2, 0], "side": "right"}, {"at": [2, 2]},
               {"at": [0, 2], "side": "left"}]  # fmt: skip
    return _refiner(document({"outline": corners}, HOLD, LOAD, element=element, size=size))


def _refiner(given: dict) -> Refiner:
    return refiner(read_document(orjson.dumps(given)))


def cells(mesh: Mesh) -> list[int]:
    """Elements of each patch of the L."""
    centres = np.concatenate([mesh.coords(b)[:, :4].mean(axis=1) for b in range(len(mesh.blocks))])
    right, upper = centres[:, 0] > 1, centres[:, 1] > 1
    return [int(part.sum()) for part in (~right & ~upper, right, upper)]


NO_CORNERS = np.empty((0, 3))


@pytest.mark.parametrize("element", ELEMENTS)
def test_a_patch_that_needs_more_takes_its_strips_with_it(element: str) -> None:
    """Only "two" needs half the size: its strips are doubled, of which one runs through "one"."""
    made = patches(element)
    first = made.first()
    ratios = np.ones(first.element_count)
    per_cell = 2 if element[0] == "T" else 1
    ratios[6 * per_cell : 18 * per_cell] = 0.5
    finer = made.finer(first, ratios, NO_CORNERS)
    assert cells(first) == [6 * per_cell, 12 * per_cell, 10 * per_cell]
    assert cells(finer) == [12 * per_cell, 48 * per_cell, 10 * per_cell]


def test_nodes_of_patches_stay_nodes() -> None:
    """Named points and ends of selected segments are found on every mesh, graded ones too."""
    made = patches("Q4")
    coarse, finer = made.first(), made.series(1)
    for node in coarse.nodes:
        assert np.linalg.norm(finer.nodes - node, axis=1).min() < 1e-12
    assert finer.points.keys() == coarse.points.keys()


def test_patches_always_get_finer_somewhere() -> None:
    made = patches("Q8")
    first = made.first()
    finer = made.finer(first, np.full(first.element_count, 0.99), NO_CORNERS)
    assert finer.element_count > first.element_count


def test_the_meshes_of_a_series_have_the_same_sides() -> None:
    for made in (patches("T6"), square("T6")):
        lengths = []
        for number in range(3):
            mesh = made.series(number)
            lengths.append(mesh.facet_lengths(mesh.sides["right"]).sum())
        assert np.ptp(lengths) < 1e-12 * lengths[0]


@pytest.mark.parametrize("element", ELEMENTS)
def test_each_mesh_of_a_series_is_finer(element: str) -> None:
    """0.7 and 0.5 of the size: about 2 and 4 times the elements."""
    counts = [square(element).series(number).element_count for number in range(3)]
    assert 1.6 < counts[1] / counts[0] < 2.6
    assert 3.2 < counts[2] / counts[0] < 5.0


@pytest.mark.parametrize("element", ELEMENTS)
def test_a_free_mesh_follows_the_sizes_that_are_asked(element: str) -> None:
    """A third of the size in the left half: the count within a third of the sum of r^-2."""
    made = square(element, size=0.2)
    first = made.first()
    centres = np.concatenate([first.coords(b).mean(axis=1) for b in range(len(first.blocks))])
    ratios = np.where(centres[:, 0] < 1, 1 / 3, 1.0)
    finer = made.finer(first, ratios, NO_CORNERS)
    expected = (1 / ratios**2).sum()
    assert finer.element_count == pytest.approx(expected, rel=0.35)
    sizes, at = element_sizes(finer), _centres(finer)
    asked = np.median(element_sizes(first)[centres[:, 0] < 1]) / 3
    assert np.median(sizes[at < 0.7]) == pytest.approx(asked, rel=0.2)


def _centres(mesh: Mesh) -> np.ndarray:
    return np.concatenate([mesh.coords(b)[..., 0].mean(axis=1) for b in range(len(mesh.blocks))])


def test_a_corner_has_small_elements_all_around() -> None:
    made = square("T6", size=0.5)
    first = made.first()
    corner = np.array([[2.0, 2.0, 0.004]])
    finer = made.finer(first, np.ones(first.element_count), corner)
    node = int(np.linalg.norm(finer.nodes - [2, 2], axis=1).argmin())
    (block,) = finer.blocks
    touching = (block.connectivity == node).any(axis=1)
    assert element_sizes(finer)[touching].max() < 3 * 0.004
    assert finer.element_count < 60 * first.element_count


@pytest.mark.parametrize("element", ELEMENTS)
def test_areas_add_up(element: str) -> None:
    assert element_areas(square(element).first()).sum() == pytest.approx(4.0, rel=1e-12)
