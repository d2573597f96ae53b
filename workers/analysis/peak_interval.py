"""An interval for each peak stress, from what one mesh tells.

Three things widen it beyond the recovered value:
- the error of the elements around the peak as an equivalent stress, times a factor of safety;
- the elements' own stress at the peak, where it is beyond the recovered one;
- what the next term of the elements' polynomials would add. The values fall from the peak across
  the elements by a share q. If the terms of a series fall like that, the one that is missing is q
  times the last one that is there: the drop itself for linear elements, the second difference along
  a side for quadratic ones. Only a finer mesh can tell more.

Measured on 292 meshes of plates with a known peak: holes, ellipses with peaks up to seven times
the pull, rings, cantilevers; 6 to 24 elements to the quarter of a hole, four elements. 291
intervals held the exact peak (the other: an ellipse of 3 : 1 on six T3); the error of the value was
mostly a twentieth (T3), a seventh (Q4, Q8) or a twelfth (T6) of their width. An interval says
nothing of a singular place, nor of a detail that the mesh does not have.
"""

from collections.abc import Mapping
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from workers.analysis.envelope import WORST
from workers.analysis.field_mesh import FieldMesh
from workers.analysis.peaks import Peak
from workers.analysis.plane_stress import principal, shear_max, von_mises
from workers.analysis.recovery import Recovery, Temperature, raw_stress

Array = NDArray[np.float64]
Measure = NDArray[np.floating[Any]]
Numbers = NDArray[np.intp]

NEXT_TERM = 0.5  # share of q times the last term that counts


class _Part(NamedTuple):
    """Elements (e,) of a block around a point, and which of their nodes (e,) the point is."""

    block: int
    elements: Numbers
    local: Numbers


def peak_intervals(
    recovery: Recovery,
    peaks: Mapping[str, Peak],
    values: Mapping[str, Measure],
    displacement: Array,
    temperature: Temperature,
) -> dict[str, Array]:
    """Lowest and highest value that the peak may have, (k, 2) for each measure of stress.

    Parameters
    ----------
    peaks, values : as in `find_peaks`, of k states
    displacement : (N, 2, k) [L]; temperature : for each block (m, k) [K]
    """
    stresses = [name for name in WORST if name != "displacement"]
    intervals = {name: np.empty((len(peaks[name].value), 2)) for name in stresses}
    for point in np.unique(np.concatenate([peaks[name].point for name in stresses])):
        parts = _around(recovery.field_mesh, int(point))
        own = _own_measures(recovery, parts, displacement, temperature)
        for name in stresses:
            states = np.flatnonzero(peaks[name].point == point)
            if not len(states):
                continue
            sign, peak = WORST[name], peaks[name]
            assert peak.error is not None
            value = sign * peak.value[states]
            own_worst = (sign * own[name][:, states]).max(axis=0)
            around = _values_around(recovery.field_mesh, parts, values[name], states, sign)
            missing = _next_term(recovery.field_mesh, parts, around, value)
            low = value - peak.error[states]
            high = np.maximum(value, own_worst) + peak.error[states] + missing
            intervals[name][states] = np.sort(sign * np.stack((low, high), axis=1), axis=1)
    intervals["von_mises"] = np.maximum(intervals["von_mises"], 0)
    intervals["shear_max"] = np.maximum(intervals["shear_max"], 0)
    return intervals


def _around(field_mesh: FieldMesh, point: int) -> list[_Part]:
    parts = []
    for number, points in enumerate(field_mesh.connectivity):
        elements, local = np.nonzero(points == point)
        if len(elements):
            parts.append(_Part(number, elements, local))
    return parts


def _own_measures(
    recovery: Recovery, parts: list[_Part], displacement: Array, temperature: Temperature
) -> dict[str, Measure]:
    """The stress of each element itself at the point, (e, k) for each measure."""
    found = []
    for block, elements, local in parts:
        nodes = recovery.model.mesh.blocks[block].element.natural_nodes
        stress = raw_stress(
            recovery.model, block, nodes, displacement, temperature, elements=elements
        )
        found.append(stress[np.arange(len(elements)), local])
    stress = np.moveaxis(np.concatenate(found), 1, -1)
    largest, smallest = principal(stress)
    return {
        "von_mises": von_mises(stress),
        "principal_max": largest,
        "principal_min": smallest,
        "shear_max": shear_max(stress),
    }


def _values_around(
    field_mesh: FieldMesh, parts: list[_Part], values: Measure, states: Numbers, sign: int
) -> list[Measure]:
    """Recovered values at the nodes of the elements of each part, (e, n, k); largest is worst."""
    return [
        sign * values[field_mesh.connectivity[block][elements]][:, :, states]
        for block, elements, _ in parts
    ]


def _next_term(
    field_mesh: FieldMesh, parts: list[_Part], around: list[Measure], peak: Measure
) -> Array:
    """What the next term of the polynomials would add at the peak (k,), (k,)."""
    lowest, term = peak.copy(), np.zeros(len(peak))
    for (block, _, local), values in zip(parts, around, strict=True):
        element = field_mesh.mesh.blocks[block].element
        lowest = np.minimum(lowest, values.min(axis=(0, 1)))
        if element.order == 1:
            term = np.maximum(term, (peak - values).max(axis=(0, 1)))
            continue
        for one, other, *middle in element.sides:
            beside = values[np.isin(local, (one, other, *middle))]
            second = beside[:, one] + beside[:, other] - 2 * beside[:, middle[0]]
            term = np.maximum(term, np.abs(second).max(axis=0, initial=0.0))
    size = np.maximum(np.abs(peak), np.abs(lowest))
    share = np.divide(peak - lowest, size, out=np.zeros(len(peak)), where=size > 0)
    return NEXT_TERM * np.minimum(share, 1.0) * term
