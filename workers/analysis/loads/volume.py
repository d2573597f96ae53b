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


@dataclass(frozen=True, eq=False)
class VolumeTotals:
    """Factors of the unit loads of an area in all cases: (1, 2, c) and (3, 2, c)."""

    area: Area
    volume: Array
    mass: Array

    @classmethod
    def none(cls, area: Area, cases: int) -> "VolumeTotals":
        return cls(area, np.zeros((1, 2, cases)), np.zeros((3, 2, cases)))

    def add(self, load: VolumeLoad, case: int) -> None:
        self.volume[:, :, case] += load.volume
        self.mass[:, :, case] += load.mass

    def add_forces(self, forces: Array, cases: slice, rows: NDArray) -> None:
        """Add to nodal forces (r, 2, k) of some cases.

        rows (N,) : row of each node in the forces, -1 if it has none.
        """
        row = rows[self.area.nodes]
        there = row >= 0
        row = row[there]
        for factors, unit in ((self.volume, "volume"), (self.mass, "mass")):
            if factors.any():  # a material without density has no mass to form
                basis = getattr(self.area, unit)[there]
                for axis in (0, 1):
                    forces[row, axis] += basis @ factors[:, axis, cases]
