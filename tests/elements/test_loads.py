"""Consistent nodal loads against the fractions printed in every textbook, and statics.

Fractions: Cook, Malkus, Plesha & Witt, *Concepts and Applications of Finite Element Analysis*,
4th ed., chapters 3 and 6 (from memory; each follows from integrating the shape functions).
"""

import numpy as np
import pytest

from elements import registry
from elements.trials import isotropic

RECTANGLE = np.array([[0.0, 0.0], [3.0, 0.0], [3.0, 2.0], [0.0, 2.0]])
TRIANGLE = np.array([[0.0, 0.0], [3.0, 0.0], [1.0, 2.0]])

# Share of each corner and each mid-side node in a uniform load on the area.
AREA_SHARES = {"T3": (1 / 3, None), "T6": (0.0, 1 / 3), "Q4": (1 / 4, None), "Q8": (-1 / 12, 1 / 3)}


def straight(name: str) -> np.ndarray:
    element = registry.get(name)
    corners = TRIANGLE if element.is_triangle else RECTANGLE
    if element.order == 1:
        return corners
    return np.vstack((corners, (corners + np.roll(corners, -1, axis=0)) / 2))


@pytest.mark.parametrize("name", AREA_SHARES)
def test_uniform_body_force_is_shared_as_in_the_textbook(name: str) -> None:
    element, coords = registry.get(name), straight(name)
    corner, mid = AREA_SHARES[name]
    shares = [corner] * element.corners + ([mid] * element.corners if mid else [])
    area = 3.0 if element.is_triangle else 6.0
    force = np.broadcast_to([5.0, -7.0], (1, len(element.load_rule().weights), 2))
    load = element.body_load(coords[None], np.array([0.1]), force)[0]
    np.testing.assert_allclose(
        load, np.outer(shares, [0.1 * area * 5, -0.1 * area * 7]), atol=1e-14
    )


@pytest.mark.parametrize("name", AREA_SHARES)
def test_uniform_side_load_is_shared_one_half_or_one_four_one_sixth(name: str) -> None:
    """The first side is 3 long; Simpson's fractions for three nodes."""
    element, coords = registry.get(name), straight(name)
    traction = np.broadcast_to([2.0, 4.0], (1, element.order + 1, 2))
    load = element.side_load(coords[None], 0, traction)[0]
    expected = np.zeros_like(coords)
    shares = [1 / 2, 1 / 2] if element.order == 1 else [1 / 6, 1 / 6, 4 / 6]
    expected[list(element.sides[0])] = np.outer(shares, [6.0, 12.0])
    np.testing.assert_allclose(load, expected, atol=1e-14)


@pytest.mark.parametrize("name", AREA_SHARES)
def test_linear_side_load_is_heavier_at_its_heavier_end(name: str) -> None:
    """From p at the first corner to q at the second: L(2p + q)/6 and L(p + 2q)/6 with two nodes;
    Lp/6, Lq/6 and L(p + q)/3 with three."""
    element, coords = registry.get(name), straight(name)
    p, q, L = 1.0, 4.0, 3.0
    position, _ = element.side_points(coords[None], 0)
    traction = np.zeros_like(position)
    traction[..., 1] = p + (q - p) * position[..., 0] / L
    load = element.side_load(coords[None], 0, traction)[0, list(element.sides[0]), 1]
    two, three = [L * (2 * p + q) / 6, L * (p + 2 * q) / 6], [L * p / 6, L * q / 6, L * (p + q) / 3]
    np.testing.assert_allclose(load, two if element.order == 1 else three, rtol=1e-13)


@pytest.mark.parametrize("name", AREA_SHARES)
def test_outward_normal_points_away_from_the_centre_on_every_side(name: str) -> None:
    element, coords = registry.get(name), straight(name)
    centre = coords[: element.corners].mean(axis=0)
    for side in range(element.corners):
        position, tangent = element.side_points(coords[None], side)
        normal = np.stack((tangent[..., 1], -tangent[..., 0]), axis=-1)
        assert (((position - centre) * normal).sum(axis=-1) > 0).all()


@pytest.mark.parametrize("name", ["T6", "Q8"])
def test_pressure_on_an_arched_side_has_the_resultant_of_its_chord(name: str) -> None:
    """Hydrostatics: uniform pressure on any curve from a to b gives p times the turned chord,
    and its moment about the chord's middle vanishes when the curve is symmetric."""
    element, coords = registry.get(name), straight(name).copy()
    a, b, mid = element.sides[0]
    coords[mid] += [0.0, -0.4]
    _, tangent = element.side_points(coords[None], 0)
    normal = np.stack((tangent[..., 1], -tangent[..., 0]), axis=-1)
    traction = -2.5 * normal / np.linalg.norm(normal, axis=-1, keepdims=True)
    load = element.side_load(coords[None], 0, traction)[0]
    chord = coords[b] - coords[a]
    np.testing.assert_allclose(load.sum(axis=0), -2.5 * np.array([chord[1], -chord[0]]), atol=1e-13)
    x, y = (coords - (coords[a] + coords[b]) / 2).T
    assert (x * load[:, 1] - y * load[:, 0]).sum() == pytest.approx(0.0, abs=1e-13)


@pytest.mark.parametrize("name", AREA_SHARES)
def test_uniform_heating_pushes_like_the_restrained_stress(name: str) -> None:
    """Hooke's law: held rigidly, sigma = -E alpha dT/(1 - nu) both ways, so the nodal forces are
    those of a uniform tension E alpha dT/(1 - nu) on all sides, thickness 0.1."""
    element, coords = registry.get(name), straight(name)
    E, nu, strain = 200.0, 0.3, 1e-3
    eps0 = np.broadcast_to([strain, strain, 0.0], (1, len(element.stiffness_rule().weights), 3))
    law = isotropic(E, nu)[None]
    found = element.initial_strain_load(coords[None], law, np.array([0.1]), eps0)[0]
    expected = np.zeros_like(coords)
    for side in range(element.corners):
        _, tangent = element.side_points(coords[None], side)
        normal = np.stack((tangent[..., 1], -tangent[..., 0]), axis=-1)
        normal /= np.linalg.norm(normal, axis=-1, keepdims=True)
        expected += element.side_load(coords[None], side, 0.1 * E * strain / (1 - nu) * normal)[0]
    np.testing.assert_allclose(found, expected, atol=1e-14)


@pytest.mark.parametrize("name", AREA_SHARES)
def test_whole_batches_give_what_single_elements_give(name: str) -> None:
    element = registry.get(name)
    coords = np.array([straight(name), straight(name) * 2 + 5, straight(name) @ [[0, 1], [-1, 0]]])
    force = np.random.default_rng(1).normal(size=(3, len(element.load_rule().weights), 2))
    t = np.array([0.1, 0.2, 0.3])
    together = element.body_load(coords, t, force)
    for i in range(3):
        alone = element.body_load(coords[i : i + 1], t[i : i + 1], force[i : i + 1])[0]
        np.testing.assert_allclose(together[i], alone, rtol=1e-13)
