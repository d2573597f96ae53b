"""How wrong the stresses are: the recovered field against the elements' own.

The recovered stress sigma* is closer to the truth than the stress sigma_h of the elements, so the
energy of their difference estimates the energy of the error of sigma_h.

References
----------
Zienkiewicz & Zhu, "A simple error estimator and adaptive procedure for practical engineering
analysis", Int. J. Numer. Meth. Engng 24 (1987), eqs. for ||e|| and eta, with the recovery of 1992.
"""

from dataclasses import dataclass
from functools import partial

import numpy as np
from numpy.typing import NDArray

from workers.analysis.field_mesh import FieldMesh
from workers.analysis.model import Model
from workers.analysis.recovery import (
    ELEMENTS_AT_ONCE,
    Recovery,
    Temperature,
    region_value,
    thermal_stress,
)

Array = NDArray[np.float64]

# Where a plate expands freely, stress and error are both rounding: an energy below this part of
# the thermal strain's own (norms: 1e-9) is no stress at all, and has no relative error.
NO_ENERGY = 1e-18


@dataclass(frozen=True, eq=False)
class ErrorEstimate:
    """Squared energy norms, the integral of sigma D^-1 sigma t dA, of k states.

    element : for each block (m, k)   of sigma* - sigma_h [F L]
    strain : (k,)                     of sigma_h, twice the strain energy [F L]
    thermal : (k,)                    of D alpha dT, the measure of nothing [F L]
    """

    element: tuple[Array, ...]
    strain: Array
    thermal: Array

    @property
    def energy_norm(self) -> Array:
        """||e|| of the whole plate, (k,) [(F L)^1/2]."""
        return np.sqrt(sum(block.sum(axis=0) for block in self.element))

    @property
    def relative(self) -> Array:
        """eta = ||e|| / sqrt(||u||^2 + ||e||^2), (k,); zero where there is no stress."""
        error = self.energy_norm**2
        total = self.strain + error
        stressed = total > NO_ENERGY * self.thermal
        return np.sqrt(np.divide(error, total, out=np.zeros_like(total), where=stressed))


def estimate_error(
    recovery: Recovery,
    displacement: Array,
    nodal_stress: Array,
    temperature: Temperature = None,
) -> ErrorEstimate:
    """Estimate the error of k states.

    Parameters
    ----------
    displacement : (N, 2, k) [L]
    nodal_stress : (P, 3, k) recovered from it [F/L^2]
    temperature : for each block (m, k) [K], or None
    """
    model, states = recovery.model, displacement.shape[2]
    strain, thermal = np.zeros(states), np.zeros(states)
    recovered = _energy_stress(nodal_stress, _point_factors(model, recovery.field_mesh))
    errors = []
    for number, block in enumerate(model.mesh.blocks):
        error = np.empty((block.element_count, states))
        for start in range(0, block.element_count, ELEMENTS_AT_ONCE):
            chunk = np.arange(start, min(start + ELEMENTS_AT_ONCE, block.element_count))
            own, interpolation = recovery.operators.get(
                (number, start), partial(_operators, model, number, chunk)
            )
            u = displacement[block.connectivity[chunk]].reshape(len(chunk), -1, states)
            raw = np.matmul(own, u)
            if temperature is not None:
                free = _thermal(model, number, chunk, temperature[number][chunk], interpolation)
                raw -= free
                thermal += _squares(free).sum(axis=0)
            strain += _squares(raw).sum(axis=0)
            nodal = recovered[recovery.field_mesh.connectivity[number][chunk]]
            raw -= np.matmul(interpolation, nodal.reshape(*nodal.shape[:2], -1)).reshape(raw.shape)
            error[chunk] = _squares(raw)
        errors.append(error)
    return ErrorEstimate(tuple(errors), strain, thermal)


def error_stress(model: Model, estimate: ErrorEstimate) -> tuple[Array, ...]:
    """The error of each element as an equivalent stress, for each block (m, k) [F/L^2].

    sqrt(E ||e||^2 / V): for an error in one normal stress its root mean square over the element.
    """
    return tuple(
        np.sqrt(error * (section.youngs_modulus / volume)[:, None])
        for error, section, volume in zip(
            estimate.element, model.sections, model.volumes, strict=True
        )
    )


def _point_volumes(model: Model, number: int, elements: NDArray[np.intp]) -> Array:
    """w det J t at the points of the load rule, (e, q) [L^3]."""
    block, section = model.mesh.blocks[number], model.sections[number]
    points, weights = block.element.load_rule()
    coords = model.mesh.nodes[block.connectivity[elements]]
    _, det_J = block.element.jacobian(coords, points)
    return det_J * weights * section.thickness[elements][:, None]


# --- energies as plain sums of squares -----------------------------------------------------------
#
# For an isotropic plate sigma D^-1 sigma is the sum of the squares of
#     sqrt((1 - nu) / 2E) (sx + sy),   sqrt((1 + nu) / 2E) (sx - sy),   sqrt(2 (1 + nu) / E) txy,
# here called the energy stress. With the roots of the integration weights multiplied into the
# operators as well, an energy is what `_squares` makes of two matrix products.


def _energy_factors(youngs_modulus: Array, poissons_ratio: Array) -> Array:
    """The three factors above, (..., 3) [(L^2/F)^1/2]."""
    E, nu = youngs_modulus, poissons_ratio
    squares = ((1 - nu) / (2 * E), (1 + nu) / (2 * E), 2 * (1 + nu) / E)
    return np.sqrt(np.stack(squares, axis=-1))


def _energy_stress(stress: Array, factors: Array) -> Array:
    """Energy stress (..., 3, k) of stress (..., 3, k), or of operators; factors (..., 3)."""
    result = np.empty_like(stress)
    np.add(stress[..., 0, :], stress[..., 1, :], out=result[..., 0, :])
    np.subtract(stress[..., 0, :], stress[..., 1, :], out=result[..., 1, :])
    result[..., 2, :] = stress[..., 2, :]
    result *= factors[..., None]
    return result


def _point_factors(model: Model, field_mesh: FieldMesh) -> Array:
    """Energy factors at the field points, (P, 3)."""
    E = region_value(model, "youngs_modulus")[field_mesh.region]
    nu = region_value(model, "poissons_ratio")[field_mesh.region]
    return _energy_factors(E, nu)


def _operators(model: Model, number: int, chunk: NDArray[np.intp]) -> tuple[Array, Array]:
    """Weighted energy stress at the points of the load rule.

    Returns
    -------
    own : (e, 3q, 2n)            from the element's dofs
    interpolation : (e, q, n)    from the energy stress at its nodes, component by component
    """
    block, section = model.mesh.blocks[number], model.sections[number]
    coords = model.mesh.nodes[block.connectivity[chunk]]
    points, _ = block.element.load_rule()
    stress = block.element.stress_operator(coords, section.constitutive[chunk], points)
    root = np.sqrt(_point_volumes(model, number, chunk))
    factors = _energy_factors(section.youngs_modulus[chunk], section.poissons_ratio[chunk])
    own = _energy_stress(stress, root[..., None] * factors[:, None])
    interpolation = root[..., None] * block.element.shape_functions(points)
    return own.reshape(len(chunk), -1, own.shape[3]), interpolation


def _thermal(
    model: Model, number: int, chunk: NDArray[np.intp], change: Array, interpolation: Array
) -> Array:
    """Weighted energy stress D alpha dT, (e, 3q, k); shape functions sum to one."""
    section = model.sections[number]
    factors = _energy_factors(section.youngs_modulus[chunk], section.poissons_ratio[chunk])
    energy = _energy_stress(thermal_stress(model, number, change, chunk), factors)
    weighted = interpolation.sum(axis=2)[..., None, None] * energy[:, None]
    return weighted.reshape(len(chunk), -1, change.shape[1])


def _squares(energy_stress: Array) -> Array:
    """Sum of squares over the middle axis, (e, r, k) -> (e, k)."""
    return np.einsum("erk,erk->ek", energy_stress, energy_stress)
