"""Measures of element shape against plane trigonometry."""

import numpy as np
import pytest

from elements.registry import get
from tests.plates import ELEMENTS, grid, ring
from workers.analysis.mesh import Block, Mesh
from workers.analysis.quality import element_quality, mesh_quality


def measures(kind: str, corners: list[tuple[float, float]]) -> dict[str, float]:
    found = element_quality(get(kind), np.array([corners], float))
    return {name: float(value[0]) for name, value in found.items()}


def test_a_square_is_ideal() -> None:
    found = measures("Q4", [(0, 0), (1, 0), (1, 1), (0, 1)])
    assert found == pytest.approx({"min_angle": 90, "max_aspect": 1, "min_scaled_jacobian": 1})


def test_an_equilateral_triangle_is_ideal() -> None:
    found = measures("T3", [(0, 0), (1, 0), (0.5, np.sqrt(0.75))])
    assert found == pytest.approx({"min_angle": 60, "max_aspect": 1, "min_scaled_jacobian": 1})


@pytest.mark.parametrize("ratio", [1.5, 7.0])
def test_the_aspect_of_a_rectangle_is_the_ratio_of_its_sides(ratio: float) -> None:
    found = measures("Q4", [(0, 0), (ratio, 0), (ratio, 1), (0, 1)])
    assert found["max_aspect"] == pytest.approx(ratio)


@pytest.mark.parametrize("angle", [20.0, 45.0, 80.0])
def test_a_rhombus_has_the_sine_of_its_angle(angle: float) -> None:
    c, s = np.cos(np.radians(angle)), np.sin(np.radians(angle))
    found = measures("Q4", [(0, 0), (1, 0), (1 + c, s), (c, s)])
    assert found["min_angle"] == pytest.approx(angle)
    assert found["min_scaled_jacobian"] == pytest.approx(s)
    assert found["max_aspect"] == pytest.approx(1.0)


@pytest.mark.parametrize("height", [0.1, 0.6, 3.0])
def test_an_isosceles_triangle(height: float) -> None:
    """Base 1: the angles follow from the height; the longest side over its altitude is
    side^2/(2 area), with the area height/2."""
    found = measures("T3", [(0, 0), (1, 0), (0.5, height)])
    base = np.degrees(np.arctan2(height, 0.5))
    angles = np.array([base, base, 180 - 2 * base])
    longest = max(1.0, 0.25 + height**2)
    assert found["min_angle"] == pytest.approx(angles.min())
    assert found["min_scaled_jacobian"] == pytest.approx(
        np.sin(np.radians(angles)).min() * 2 / np.sqrt(3)
    )
    assert found["max_aspect"] == pytest.approx(np.sqrt(0.75) * longest / height)


@pytest.mark.parametrize(("straight", "curved"), [("T3", "T6"), ("Q4", "Q8")])
def test_straight_quadratic_elements_measure_like_linear_ones(straight: str, curved: str) -> None:
    def shear(x: np.ndarray, y: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        return x + 0.3 * y, 0.7 * y + 0.1 * x

    one = mesh_quality(grid(straight, 3, 2, shape=shear))
    other = mesh_quality(grid(curved, 3, 2, shape=shear))
    for name, found in one.items():
        assert other[name]["value"] == pytest.approx(found["value"], rel=1e-12)


def test_curved_sides_count_with_their_own_directions() -> None:
    """Facets of a circle about its centre leave the radii at right angles: a fine ring of Q8 is
    nearly ideal, while the chords of Q4 lean by half the angle of an element, here 15 degrees."""
    curved = mesh_quality(ring("Q8", 12, 2, 1.0, 2.0))["min_angle"]["value"]
    straight = mesh_quality(ring("Q4", 12, 2, 1.0, 2.0))["min_angle"]["value"]
    assert straight == pytest.approx(75.0)
    # The parabola through three points of a 30 degree arc leans by 0.35 degrees at its ends.
    assert 89.5 < curved < 90.0


def test_a_re_entrant_corner_has_a_negative_jacobian() -> None:
    """The angle at (1, 1) is 180 + 53.13 degrees; its sine is -0.8."""
    found = measures("Q4", [(0, 0), (4, 0), (1, 1), (0, 4)])
    assert found["min_scaled_jacobian"] == pytest.approx(-0.8)


@pytest.mark.parametrize("kind", ELEMENTS)
def test_the_worst_element_is_found_with_its_place_and_the_poor_are_counted(kind: str) -> None:
    """Columns 1 wide and one of 0.01, four cells high: aspect 100 for quadrilaterals."""

    def squeeze(x: np.ndarray, y: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        return np.where(x <= 0.5, 4 * x, 2 + (x - 0.5) * 0.02), 4 * y

    mesh = grid(kind, 4, 4, shape=squeeze, straight=True)
    found = mesh_quality(mesh)["max_aspect"]
    assert found["value"] > 50
    assert found["at"][0] > 2
    assert found["bad"] == mesh.element_count // 2
    assert found["limit"] == 10


def test_mixed_meshes_report_the_worst_of_all_blocks() -> None:
    triangle, square = get("T3"), get("Q4")
    mesh = Mesh(
        np.array([(0, 0), (1, 0), (1, 1), (0, 1), (1.1, 0.5)], float),
        (
            Block(square, np.array([[0, 1, 2, 3]], np.int32), np.zeros(1, np.int32)),
            Block(triangle, np.array([[1, 4, 2]], np.int32), np.zeros(1, np.int32)),
        ),
    )
    found = mesh_quality(mesh)["min_angle"]
    assert found["value"] == pytest.approx(np.degrees(np.arctan(0.2)))
    assert found["at"] == pytest.approx([3.1 / 3, 0.5])
