"""What a series of meshes says of one number: observed order, extrapolation, uncertainty.

References
----------
Roache, "Perspective: a method for uniform reporting of grid refinement studies", J. Fluids Eng. 116
(1994): grid convergence index with a factor of safety of 1.25 where the order is observed on meshes
that are finer everywhere, and of 3 where it is not certain. Celik et al., J. Fluids Eng. 130
(2008): the observed order with unequal ratios. Where no order shows, three times the last change,
as Eca & Hoekstra, J. Comp. Phys. 262 (2014), do with erratic series.
"""

from collections.abc import Sequence
from dataclasses import dataclass
from typing import Literal

import numpy as np
from scipy.optimize import brentq

Behaviour = Literal["converging", "oscillating", "growing", "unresolved"]

LEAST_RATIO = 1.1  # of sizes: below this two meshes say nothing of the order
LEAST_ORDER = 0.5  # observed: slower convergence is not told from none
LEAST_GROWTH = 0.1  # exponent of growth over size; a sharp but finite peak grows less
SURE, UNSURE = 1.25, 3.0  # factors of safety
SETTLED = 1e-9  # of value or scale: changes are rounding


@dataclass(frozen=True)
class GridConvergence:
    """The last three meshes of a series.

    behaviour : converging with an observed order; oscillating; growing like a power of the size;
        unresolved where the meshes are too few, too alike, or the changes do not fall
    order, extrapolated : None unless converging
    uncertainty : as a value, not a ratio; None where it grows, or on one mesh
    """

    behaviour: Behaviour
    order: float | None
    extrapolated: float | None
    uncertainty: float | None


def grid_convergence(
    values: Sequence[float],
    sizes: Sequence[float],
    highest_order: float,
    safety: float = SURE,
    scale: float = 0.0,
    one_place: bool = True,
) -> GridConvergence:
    """Judge a series of values on finer and finer meshes.

    Parameters
    ----------
    sizes : of the elements, falling
    highest_order : an observed order above it counts as this one
    safety : factor where an order is observed
    scale : what the values are small against, where they may be nothing but rounding
    one_place : whether all are from the same place; else growth cannot be told
    """
    if len(values) < 3:
        return _without_order(values, "unresolved")
    coarse, middle, fine = values[-3:]
    first, last = middle - coarse, fine - middle
    r32, r21 = sizes[-3] / sizes[-2], sizes[-2] / sizes[-1]
    if max(abs(first), abs(last)) <= SETTLED * max(abs(fine), scale):
        return GridConvergence("converging", highest_order, fine, 0.0)
    if min(r32, r21) < LEAST_RATIO or first * last < 0:
        return _without_order(values, "oscillating" if first * last < 0 else "unresolved")
    order = _observed_order(first, last, r32, r21, highest_order)
    if order >= LEAST_ORDER:
        change = last / (r21**order - 1)
        return GridConvergence("converging", order, fine + change, safety * abs(change))
    growth = min(_growth(coarse, middle, r32), _growth(middle, fine, r21))
    if one_place and growth > LEAST_GROWTH:
        return GridConvergence("growing", None, None, None)
    return _without_order(values, "unresolved")


def _without_order(values: Sequence[float], behaviour: Behaviour) -> GridConvergence:
    uncertainty = None
    if len(values) > 1:
        uncertainty = UNSURE * abs(values[-1] - values[-2])
    return GridConvergence(behaviour, None, None, uncertainty)


def _growth(before: float, after: float, ratio: float) -> float:
    """Exponent of the growth from one mesh to the next, negative where the value falls."""
    if before * after <= 0:
        return 0.0
    return float(np.log(after / before) / np.log(ratio))


def _observed_order(first: float, last: float, r32: float, r21: float, highest: float) -> float:
    """p with first / last = r21^p (r32^p - 1) / (r21^p - 1), between 0 and the highest."""
    if last == 0:
        return highest
    if first == 0:
        return 0.0

    def excess(p: float) -> float:
        return float(np.log(abs(first / last) * (r21**p - 1) / (r32**p - 1) / r21**p))

    low = 1e-6
    if excess(low) <= 0:
        return 0.0
    return highest if excess(highest) >= 0 else float(brentq(excess, low, highest))
