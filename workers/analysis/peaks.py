"""Peaks of a state: the worst value of each measure, where it is, and how far to trust it.

The error of a peak is taken from the elements around it: the largest of their errors as
equivalent stresses (`error_estimate.error_stress`), times a factor of safety, because the stress
at a point may be further off than the mean over an element. On 500 meshes of Kirsch's plate (four
elements, smooth and warped, 3 to 32 elements to a quarter of the hole) the true error of the peak
was mostly a tenth to a half of the estimate, and above it, by a tenth, only with four elements or
fewer to the quarter. The estimate cannot see a singularity: there every mesh is wrong.
"""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from workers.analysis.envelope import WORST
from workers.analysis.field_mesh import FieldMesh

SAFETY = 2.0

Array = NDArray[np.float64]
Measure = NDArray[np.floating[Any]]


@dataclass(frozen=True, eq=False)
class Peak:
    """The worst value of a measure in each of k states.

    value : (k,)
    point : (k,)         number of the field point
    least : (k,)         the other end of the field's range
    error : (k,) or None    estimated, same dimension as the value
    """

    value: Measure
    point: NDArray[np.intp]
    least: Measure
    error: Array | None


def find_peaks(
    field_mesh: FieldMesh, values: Mapping[str, Measure], element_error: tuple[Array, ...]
) -> dict[str, Peak]:
    """Peaks of all measures of k states.

    Parameters
    ----------
    values : measure -> (P, k), as `envelope.measures` makes them
    element_error : for each block (m, k), as an equivalent stress [F/L^2]
    """
    found = {}
    for name, sign in WORST.items():
        point = worst(values[name], sign)
        found[name] = Peak(
            value=np.take_along_axis(values[name], point[None], axis=0)[0],
            point=point,
            least=values[name].min(axis=0) if sign > 0 else values[name].max(axis=0),
            error=None if name == "displacement" else _error(field_mesh, point, element_error),
        )
    return found


def _error(
    field_mesh: FieldMesh, point: NDArray[np.intp], element_error: tuple[Array, ...]
) -> Array:
    """Error of the stress at one field point for each state, (k,) [F/L^2]."""
    error = np.zeros(len(point))
    for place in np.unique(point):
        states = np.flatnonzero(point == place)
        for points, of_block in zip(field_mesh.connectivity, element_error, strict=True):
            around = np.flatnonzero((points == place).any(axis=1))
            if len(around):
                largest = of_block[np.ix_(around, states)].max(axis=0)
                error[states] = np.maximum(error[states], largest)
    return SAFETY * error


def worst(values: Measure, sign: int, axis: int = 0) -> NDArray[np.intp]:
    """Where values are largest (sign +1) or smallest (-1) along an axis."""
    return values.argmax(axis=axis) if sign > 0 else values.argmin(axis=axis)


@dataclass(frozen=True, eq=False)
class Utilisation:
    """Von Mises over yield strength, at its worst, in each of k states; (k,) each."""

    value: Array
    point: NDArray[np.intp]


def find_utilisation(von_mises: Measure, yield_strength: Array) -> Utilisation | None:
    """Worst utilisation of k states; None where no material states a yield strength.

    von_mises : (P, k) [F/L^2]; yield_strength : (P,) at the field points, nan where unknown.
    """
    known = np.flatnonzero(~np.isnan(yield_strength))
    if not len(known):
        return None
    ratio = von_mises[known] / yield_strength[known][:, None]
    worst = ratio.argmax(axis=0)
    return Utilisation(ratio[worst, np.arange(ratio.shape[1])], known[worst])
