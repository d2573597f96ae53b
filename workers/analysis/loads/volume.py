"""Loads in the volume of the plate: body forces, acceleration, rotation.

Each is a combination of a few unit loads of its area, so hundreds of load cases cost one matrix
product instead of a pass over the elements each.
"""

from dataclasses import dataclass
from functools import singledispatch

import numpy as np
from numpy.typing import NDArray

from workers.analysis.loads.area import Area
from workers.analysis.loads.kinds import Places
from workers.job import Acceleration, BodyForce, Load, Spin

Array = NDArray[np.float64]

VOLUME_LOADS = (BodyForce, Acceleration, Spin)


@dataclass(frozen=True, eq=False)
class VolumeLoad:
    """Factors of the unit loads of an area, for forces in x and y.

    volume : (1, 2)   of the integral of N t dA [F/L^3]
    mass : (3, 2)     of the integrals of N rho t (1, x, y) dA [L/s^2], [1/s^2]
    """

    volume: Array
    mass: Array


@singledispatch
def volume_load(load: Load, places: Places) -> VolumeLoad:
    """Factors of the unit loads of `places.area(load)`.

    Raises
    ------
    MeshError   the load cannot act where the document puts it, or a density is missing.
    """
    raise TypeError(f"{type(load).__name__} does not act in a volume")


@volume_load.register
def _(load: BodyForce, places: Places) -> VolumeLoad:
    return VolumeLoad(np.array([load.force]), np.zeros((3, 2)))


@volume_load.register
def _(load: Acceleration, places: Places) -> VolumeLoad:
    _require_density(load, places)
    return VolumeLoad(np.zeros((1, 2)), np.array([load.acceleration, (0, 0), (0, 0)], float))


@volume_load.register
def _(load: Spin, places: Places) -> VolumeLoad:
    """rho omega^2 (x - about), outward."""
    _require_density(load, places)
    x, y = load.about
    return VolumeLoad(np.zeros((1, 2)), load.speed**2 * np.array([(-x, -y), (1, 0), (0, 1)], float))


def _require_density(load: Load, places: Places) -> None:
    places.area(load).require("density", "density", load.pointer)


class VolumeTotals:
    """Adds up the volume loads of all cases on one area."""

    def __init__(self, cases: int) -> None:
        self._volume = np.zeros((1, 2, cases))
        self._mass = np.zeros((3, 2, cases))

    def add(self, load: VolumeLoad, case: int) -> None:
        self._volume[:, :, case] += load.volume
        self._mass[:, :, case] += load.mass

    def add_forces(self, area: Area, applied: Array) -> None:
        """Add the nodal forces (N, 2, c) of all cases."""
        nodes = slice(None) if len(area.nodes) == len(applied) else area.nodes
        for axis in (0, 1):
            if self._volume.any():
                applied[nodes, axis] += area.volume[:, None] * self._volume[0, axis]
            if self._mass.any():
                applied[nodes, axis] += area.mass @ self._mass[:, axis]
