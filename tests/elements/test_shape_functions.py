"""Shape functions, gradients and the inverse map against VTK's own cells.

VTK is a general reference library here: vtkTriangle, vtkQuadraticTriangle, vtkQuad and
vtkQuadraticQuad. VTK's parametric coordinates run from 0 to 1, ours on quadrilaterals from -1.
"""

import numpy as np
import pytest
from numpy.typing import NDArray
from vtkmodules.vtkCommonCore import mutable

from elements import registry
from elements.contract import ElementType
from elements.trials import curved_shapes, straight_shapes
from workers.verification.element_cases import parametric, vtk_cell

Array = NDArray[np.float64]
NAMES = ["T3", "T6", "Q4", "Q8"]


def random_natural_points(element: ElementType, count: int = 25) -> Array:
    """Inside and somewhat outside of the element."""
    return np.random.default_rng(3).uniform(-1.2, 1.2, (count, 2))


@pytest.mark.parametrize("name", NAMES)
def test_shape_functions_equal_those_of_the_vtk_cell(name: str) -> None:
    element = registry.get(name)
    cell = vtk_cell(element, element.natural_nodes)
    points = random_natural_points(element)
    expected = np.zeros((len(points), element.node_count))
    for row, point in zip(expected, points, strict=True):
        cell.InterpolateFunctions(parametric(element, point), row)
    np.testing.assert_allclose(element.shape_functions(points), expected, atol=1e-14)


@pytest.mark.parametrize("name", NAMES)
def test_cartesian_gradients_equal_the_derivatives_of_the_vtk_cell(name: str) -> None:
    """d/dx and d/dy of nodal values on distorted and curved elements, element by element."""
    element = registry.get(name)
    coords = (curved_shapes if element.order == 2 else straight_shapes)(element)[:10]
    values = np.random.default_rng(4).normal(size=element.node_count)
    points = element.recovery_points()
    G, _ = element.cartesian_gradients(coords, points)
    expected, derivative = np.zeros((len(coords), len(points), 2)), [0.0, 0.0, 0.0]
    for row, nodes in zip(expected, coords, strict=True):
        cell = vtk_cell(element, nodes)
        for slot, point in zip(row, points, strict=True):
            cell.Derivatives(0, parametric(element, point), values, 1, derivative)
            slot[:] = derivative[:2]
    np.testing.assert_allclose(G @ values, expected, rtol=1e-10, atol=1e-12)


@pytest.mark.parametrize("name", NAMES)
def test_inverse_map_undoes_the_forward_map_of_the_vtk_cell(name: str) -> None:
    element = registry.get(name)
    coords = (curved_shapes if element.order == 2 else straight_shapes)(element)[:10]
    location, weights = [0.0, 0.0, 0.0], [0.0] * element.node_count
    for point in element.recovery_points() * 0.9 + 0.02:
        xy = np.zeros((len(coords), 2))
        for row, nodes in zip(xy, coords, strict=True):
            cell, sub = vtk_cell(element, nodes), mutable(0)
            cell.EvaluateLocation(sub, parametric(element, point), location, weights)
            row[:] = location[:2]
        natural, converged = element.natural_coordinates(coords, xy)
        assert converged.all()
        np.testing.assert_allclose(natural, np.tile(point, (len(coords), 1)), atol=1e-10)


@pytest.mark.parametrize("name", NAMES)
def test_points_outside_are_told_from_points_inside(name: str) -> None:
    """By geometry: the centre is inside; 1.2 times as far as the border, seen from it, is not."""
    element = registry.get(name)
    coords = straight_shapes(element)
    centre = coords[:, : element.corners].mean(axis=1)
    middle = (coords[:, 0] + coords[:, 1]) / 2
    for factor, expected in ((0.0, True), (0.8, True), (1.0, True), (1.2, False)):
        natural, converged = element.natural_coordinates(
            coords, centre + factor * (middle - centre)
        )
        assert ((element.inside(natural) & converged) == expected).all()


@pytest.mark.parametrize("name", NAMES)
def test_a_point_far_outside_is_never_reported_as_inside(name: str) -> None:
    element = registry.get(name)
    coords = (curved_shapes if element.order == 2 else straight_shapes)(element)
    for direction in ([50.0, 3.0], [-4.0, 40.0], [-30.0, -30.0]):
        xy = np.broadcast_to(direction, (len(coords), 2))
        natural, converged = element.natural_coordinates(coords, xy)
        assert not (element.inside(natural) & converged).any()
