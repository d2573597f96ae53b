"""One function for each kind of load at a point or on a side: the nodal forces it stands for."""

from collections.abc import Hashable
from dataclasses import dataclass
from functools import singledispatch

import numpy as np
from numpy.typing import NDArray

from workers.analysis.load_places import LoadPlaces
from workers.analysis.loads.area import Area
from workers.analysis.loads.bearing import bearing_load
from workers.analysis.loads.side import Side, fractions, side_of
from workers.analysis.model import Model
from workers.analysis.selection import Finder
from workers.job import (
    Bearing,
    LineLoad,
    Load,
    PointForce,
    Pressure,
    Shear,
    TotalForce,
    TotalMoment,
    Traction,
)

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class NodalLoad:
    """Forces (k, 2) [F] on nodes (k,), each node once."""

    nodes: NDArray[np.int64]
    force: Array


class Places:
    """Where the loads of a model act, found once for each target and shared by all cases.

    Methods raise MeshError where a load cannot act; see `load_places.py`.
    """

    def __init__(self, model: Model) -> None:
        self.model = model
        self._places = LoadPlaces(Finder(model.mesh))
        self._sides: dict[Hashable, Side] = {}
        self._areas: dict[Hashable, Area] = {}

    def point(self, load: Load) -> NDArray[np.int64]:
        """The node that a load acts on, (1,)."""
        return self._places.find(load).nodes.astype(np.int64)

    def side(self, load: Load) -> Side:
        """Integration points of the side that a load acts on."""
        selection = self._places.find(load)
        if load.on not in self._sides:
            self._sides[load.on] = side_of(self.model, selection.facets)
        return self._sides[load.on]

    def area(self, load: Load) -> Area:
        """Elements that a load acts on; all of them where it does not say."""
        elements = self._places.find(load).elements
        if load.on not in self._areas:
            self._areas[load.on] = Area(self.model, elements)
        return self._areas[load.on]


@singledispatch
def nodal_load(load: Load, places: Places) -> NodalLoad:
    """Nodal forces of a load at a point or on a side.

    Raises
    ------
    MeshError   the load cannot act where the document puts it, or a property is missing.
    """
    raise TypeError(f"{type(load).__name__} does not act at a point or on a side")


@nodal_load.register
def _(load: PointForce, places: Places) -> NodalLoad:
    return NodalLoad(places.point(load), np.array([load.force], float))


@nodal_load.register(TotalForce | TotalMoment | Traction | LineLoad | Pressure | Shear | Bearing)
def _(load: Load, places: Places) -> NodalLoad:
    side, force = side_force(load, places)
    return NodalLoad(side.nodes, side.nodal(force))


@singledispatch
def side_force(load: Load, places: Places) -> tuple[Side, Array]:
    """The side that a load acts on, and its force per length at the points there (p, 2) [F/L].

    Raises
    ------
    MeshError   as `nodal_load`.
    """
    raise TypeError(f"{type(load).__name__} does not act on a side")


@side_force.register
def _(load: TotalForce, places: Places) -> tuple[Side, Array]:
    side = places.side(load)
    even = np.asarray(load.force) / side.length.sum()
    return side, np.tile(even, (len(side.length), 1))


@side_force.register
def _(load: TotalMoment, places: Places) -> tuple[Side, Array]:
    """A normal traction that is linear along the side and has no resultant force."""
    side = places.side(load)
    normal = side.normal[0]
    centre = np.average(side.position, axis=0, weights=side.length)
    along = (side.position - centre) @ side.tangent[0]
    unit = np.outer(along, normal)
    arm = side.position - centre
    moment = side.length @ (arm[:, 0] * unit[:, 1] - arm[:, 1] * unit[:, 0])
    return side, unit * (load.moment / moment)


@side_force.register
def _(load: Traction, places: Places) -> tuple[Side, Array]:
    side = places.side(load)
    force = _varying(load, np.asarray(load.start), np.asarray(load.end), side, places)
    return side, force * side.thickness[:, None]


@side_force.register
def _(load: LineLoad, places: Places) -> tuple[Side, Array]:
    side = places.side(load)
    force = _varying(load, np.asarray(load.start), np.asarray(load.end), side, places)
    return side, force


@side_force.register
def _(load: Pressure, places: Places) -> tuple[Side, Array]:
    side = places.side(load)
    size = _varying(load, np.array([load.start]), np.array([load.end]), side, places)
    return side, -size * side.thickness[:, None] * side.normal


@side_force.register
def _(load: Shear, places: Places) -> tuple[Side, Array]:
    side = places.side(load)
    size = _varying(load, np.array([load.start]), np.array([load.end]), side, places)
    return side, size * side.thickness[:, None] * side.tangent


@side_force.register
def _(load: Bearing, places: Places) -> tuple[Side, Array]:
    side = places.side(load)
    positions = places.model.mesh.nodes[side.nodes]
    return side, bearing_load(side, positions, load.force, load.pointer)


def _varying(load: Load, start: Array, end: Array, side: Side, places: Places) -> Array:
    """Value at each point of the side, (p, components), linear from start to end."""
    if np.array_equal(start, end):
        return np.tile(start.astype(float), (len(side.length), 1))
    fraction = fractions(side, places.model)[:, None]
    return (1.0 - fraction) * start + fraction * end
