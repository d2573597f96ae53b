"""The plane-stress law against Hooke's law in three dimensions and against eigenvalues."""

import numpy as np
import pytest

from workers.analysis.plane_stress import (
    constitutive,
    principal,
    shear_max,
    thermal_strain,
    thickness_strain,
    von_mises,
)

E, NU = 210e3, 0.3
STATES = np.random.default_rng(4).normal(size=(50, 3)) * 100


def _tensor(stress: np.ndarray) -> np.ndarray:
    """(m, 3, 3) stress tensors with a stress-free face."""
    tensor = np.zeros((len(stress), 3, 3))
    tensor[:, 0, 0], tensor[:, 1, 1] = stress[:, 0], stress[:, 1]
    tensor[:, 0, 1] = tensor[:, 1, 0] = stress[:, 2]
    return tensor


@pytest.mark.parametrize("nu", [-0.5, 0.0, 0.3, 0.499])
def test_law_inverts_hookes_compliance(nu: float) -> None:
    """Strain by Hooke's law with sigma_z = 0: (sx - nu sy)/E, (sy - nu sx)/E, 2(1+nu) txy/E."""
    compliance = np.array([[1, -nu, 0], [-nu, 1, 0], [0, 0, 2 * (1 + nu)]]) / E
    np.testing.assert_allclose(constitutive(E, nu) @ compliance, np.eye(3), atol=1e-14)


def test_law_of_several_materials_is_stacked() -> None:
    law = constitutive([1.0, 2.0], [0.0, 0.25])
    np.testing.assert_array_equal(law[0], np.diag([1.0, 1.0, 0.5]))
    np.testing.assert_allclose(law[1], constitutive(2.0, 0.25))


def test_von_mises_is_the_norm_of_the_stress_deviator() -> None:
    """sqrt(3/2 s:s), the definition in three dimensions."""
    tensor = _tensor(STATES)
    deviator = tensor - np.trace(tensor, axis1=1, axis2=2)[:, None, None] / 3 * np.eye(3)
    expected = np.sqrt(1.5 * (deviator**2).sum(axis=(1, 2)))
    np.testing.assert_allclose(von_mises(STATES), expected, rtol=1e-13)


def test_von_mises_of_textbook_states() -> None:
    """Uniaxial: its size; pure shear: sqrt(3) tau; equal biaxial: its size."""
    states = np.array([[-7.0, 0, 0], [0, 0, 2.0], [5.0, 5.0, 0]])
    np.testing.assert_allclose(von_mises(states), [7.0, 2.0 * np.sqrt(3), 5.0], rtol=1e-15)


def test_principal_stresses_are_the_eigenvalues() -> None:
    largest, smallest = principal(STATES)
    expected = np.linalg.eigvalsh(_tensor(STATES)[:, :2, :2])
    np.testing.assert_allclose(smallest, expected[:, 0], atol=1e-11)
    np.testing.assert_allclose(largest, expected[:, 1], atol=1e-11)


def test_largest_shear_is_half_the_range_of_all_three_principal_stresses() -> None:
    eigenvalues = np.linalg.eigvalsh(_tensor(STATES))
    expected = (eigenvalues[:, 2] - eigenvalues[:, 0]) / 2
    np.testing.assert_allclose(shear_max(STATES), expected, atol=1e-11)


def test_thickness_strain_follows_hookes_law_in_three_dimensions() -> None:
    """eps_z = (sz - nu (sx + sy)) / E + alpha dT with sz = 0."""
    expected = -NU * (STATES[:, 0] + STATES[:, 1]) / E + 1.2e-5 * 40
    np.testing.assert_allclose(thickness_strain(STATES, E, NU, 1.2e-5, 40.0), expected)


def test_free_heating_strains_equally_both_ways_without_shear() -> None:
    np.testing.assert_allclose(thermal_strain(1e-5, [0.0, 10.0]), [[0, 0, 0], [1e-4, 1e-4, 0]])
