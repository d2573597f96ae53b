"""The fields of one state, ready to be written or drawn.

Everything is formed from displacements alone, so that any state can be written long after the
solution. Von Mises and principal stresses are formed after superposition.
"""

from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from elements.contract import ElementType
from workers.analysis.combine import States, superpose, superpose_blocks
from workers.analysis.error_estimate import error_stress, estimate_error
from workers.analysis.plane_stress import principal, shear_max, thickness_strain, von_mises
from workers.analysis.recovery import Recovery, Temperature, raw_stress, region_value
from workers.analysis.solution import Solution

Array = NDArray[np.float64]
Measure = NDArray[np.floating[Any]]


@dataclass(frozen=True, eq=False)
class Fields:
    """Fields of one state on the P points of a `FieldMesh`, and per element.

    name : str                      of the load case or combination
    displacement : (P, 2) array     [L]
    stress : (P, 3) array           recovered: xx, yy, xy [F/L^2]
    von_mises, principal_max, principal_min : (P,) arrays   [F/L^2]
    shear_max : (P,) array          largest shear on any plane, out-of-plane ones included [F/L^2]
    thickness_strain : (P,) array   -nu (xx + yy) / E + alpha dT
    cell_stress : tuple of (m, 3)   per block: the element's own stress at its centre [F/L^2]
    cell_error : tuple of (m,)      per block: estimated error as an equivalent stress,
                                    sqrt(E e^2 / V) with the energy norm e and volume V [F/L^2]
    """

    name: str
    displacement: Array
    stress: Array
    von_mises: Measure
    principal_max: Measure
    principal_min: Measure
    shear_max: Measure
    thickness_strain: Measure
    cell_stress: tuple[Array, ...]
    cell_error: tuple[Array, ...]


def state_fields(solution: Solution, recovery: Recovery, states: States, name: str) -> Fields:
    """Fields of a load case or combination.

    Raises
    ------
    KeyError   there is no state of that name.
    """
    column = states.index(name)
    columns = range(column, column + 1)
    return displacement_fields(
        recovery,
        name,
        superpose(solution.displacement, states, columns),
        superpose_blocks(solution.temperature, states, columns),
    )


def displacement_fields(
    recovery: Recovery, name: str, displacement: Array, temperature: Temperature = None
) -> Fields:
    """Fields of a displacement (N, 2, 1) [L] and temperature changes (m, 1) per block [K]."""
    model, field_mesh = recovery.model, recovery.field_mesh
    nodal = recovery.nodal_stress(displacement, temperature)
    estimate = estimate_error(recovery, displacement, nodal, temperature)
    stress = np.ascontiguousarray(nodal[..., 0])
    largest, smallest = principal(stress)
    return Fields(
        name=name,
        displacement=displacement[field_mesh.origin, :, 0],
        stress=stress,
        von_mises=von_mises(stress),
        principal_max=largest,
        principal_min=smallest,
        shear_max=shear_max(stress),
        thickness_strain=thickness_strain(
            stress,
            region_value(model, "youngs_modulus")[field_mesh.region],
            region_value(model, "poissons_ratio")[field_mesh.region],
        )
        + _free_strain(recovery, temperature),
        cell_stress=tuple(
            raw_stress(model, number, _centre(block.element), displacement, temperature)[:, 0, :, 0]
            for number, block in enumerate(model.mesh.blocks)
        ),
        cell_error=tuple(error[:, 0] for error in error_stress(model, estimate)),
    )


def _centre(element: ElementType) -> Array:
    return element.natural_nodes[: element.corners].mean(axis=0, keepdims=True)


def _free_strain(recovery: Recovery, temperature: Temperature) -> Array:
    """alpha dT at the field points, (P,): the mean of the elements around each."""
    count = recovery.field_mesh.point_count
    total, elements = np.zeros(count), np.zeros(count)
    if temperature is None:
        return total
    for number, points in enumerate(recovery.field_mesh.connectivity):
        change = temperature[number][:, 0]
        expansion = recovery.model.sections[number].thermal_expansion
        strain = np.where(change == 0, 0.0, expansion) * change
        each = np.repeat(strain, points.shape[1])
        total += np.bincount(points.ravel(), each, minlength=count)
        elements += np.bincount(points.ravel(), minlength=count)
    return total / elements
