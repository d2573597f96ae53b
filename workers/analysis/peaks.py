"""Peaks of a state: the worst value of each measure, where it is, and how far to trust it.

The error of a peak is taken from the elements around it: the largest of their errors as
equivalent stresses (`error_estimate.error_stress`), times a factor of safety, because the stress
at a point may be further off than the mean over an element. On 384 meshes of Kirsch's plate (four
elements, two gradings, even and warped three ways, 3 to 32 elements to a quarter of the hole) the
true error of the peak was mostly a tenth to a half of the estimate. On 30 of them it was above it,
all with three to six elements to the quarter, by 71 % at most (Q4 with three), by 42 % with T6, and
never with Q8. The estimate cannot see a singularity: there every mesh is wrong, and the peak is
sought outside the neighbourhoods of the singular places (`zones.py`).
"""

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from workers.analysis.envelope import WORST
from workers.analysis.field_mesh import FieldMesh
from workers.analysis.zones import ActiveZones

SAFETY = 2.0
ROWS_AT_ONCE = 256

Array = NDArray[np.float64]
Measure = NDArray[np.floating[Any]]

NO_ZONES = ActiveZones(np.empty(0, np.intp), np.zeros((0, 0), bool))


@dataclass(frozen=True, eq=False)
class Peak:
    """The worst value of a measure in each of k states.

    value : (k,)
    point : (k,)         number of the field point
    least : (k,)         the other end of the field's range
    error : (k,) or None    estimated, same dimension as the value
    singular : (k,)         point with a worse value in an excluded neighbourhood; -1 if none
    singular_value : (k,)   the value there, nan if none
    """

    value: Measure
    point: NDArray[np.intp]
    least: Measure
    error: Array | None
    singular: NDArray[np.intp]
    singular_value: Measure


def find_peaks(
    field_mesh: FieldMesh,
    values: Mapping[str, Measure],
    element_error: tuple[Array, ...],
    zones: ActiveZones = NO_ZONES,
) -> dict[str, Peak]:
    """Peaks of all measures of k states.

    Parameters
    ----------
    values : measure -> (P, k), as `envelope.measures` makes them
    element_error : for each block (m, k), as an equivalent stress [F/L^2]
    zones : where stress is not reported; displacements are finite everywhere
    """
    found = {}
    for name, sign in WORST.items():
        is_stress = name != "displacement"
        everywhere = worst(values[name], sign)
        point = _outside(values[name], sign, everywhere, zones) if is_stress else everywhere
        beaten = point != everywhere
        found[name] = Peak(
            value=_at(values[name], point),
            point=point,
            least=values[name].min(axis=0) if sign > 0 else values[name].max(axis=0),
            error=_error(field_mesh, point, element_error) if is_stress else None,
            singular=np.where(beaten, everywhere, -1),
            singular_value=np.where(beaten, _at(values[name], everywhere), np.nan),
        )
    return found


def _at(values: Measure, point: NDArray[np.intp]) -> Measure:
    return np.take_along_axis(values, point[None], axis=0)[0]


def _outside(
    values: Measure, sign: int, everywhere: NDArray[np.intp], zones: ActiveZones
) -> NDArray[np.intp]:
    """Where values are worst outside the zones; everywhere if a state has nothing outside."""
    if not zones.excluded.any():
        return everywhere
    inside = values[zones.points].copy()
    values[zones.points] = np.where(zones.excluded, -sign * np.inf, inside)
    point = worst(values, sign)
    nothing = np.isinf(_at(values, point))
    values[zones.points] = inside
    return np.where(nothing, everywhere, point)


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


def worst(values: Measure, sign: int) -> NDArray[np.intp]:
    """Where each column of values (P, k) is largest (sign +1) or smallest (-1), (k,).

    As `argmax` and `argmin` say it, by blocks of rows: six times as fast with many columns.
    """
    extreme, where = (np.maximum, np.argmax) if sign > 0 else (np.minimum, np.argmin)
    starts = np.arange(0, len(values), ROWS_AT_ONCE)
    first = starts[where(extreme.reduceat(values, starts), axis=0)]
    rows = np.minimum(first + np.arange(ROWS_AT_ONCE)[:, None], len(values) - 1)
    return first + where(np.take_along_axis(values, rows, axis=0), axis=0)


@dataclass(frozen=True, eq=False)
class Utilisation:
    """Von Mises over yield strength, at its worst, in each of k states; (k,) each."""

    value: Measure
    point: NDArray[np.intp]


def find_utilisation(
    von_mises: Measure, yield_strength: Array, zones: ActiveZones = NO_ZONES
) -> Utilisation | None:
    """Worst utilisation of k states; None where no material states a yield strength.

    von_mises : (P, k) [F/L^2]; yield_strength : (P,) at the field points, nan where unknown.
    """
    known = np.flatnonzero(~np.isnan(yield_strength))
    if not len(known):
        return None
    if len(known) < len(von_mises):
        von_mises, yield_strength = von_mises[known], yield_strength[known]
    ratio = von_mises / yield_strength[:, None]
    rows = np.searchsorted(known, zones.points)
    rows = np.minimum(rows, len(known) - 1)
    there = known[rows] == zones.points
    inside = ActiveZones(rows[there], zones.excluded[there])
    row = _outside(ratio, 1, worst(ratio, 1), inside)
    return Utilisation(_at(ratio, row), known[row])
