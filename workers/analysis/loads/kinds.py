"""One function for each kind of load at a point or on a side: the nodal forces it stands for."""

from collections.abc import Hashable
from dataclasses import dataclass, field
from functools import singledispatch

import numpy as np
from numpy.typing import NDArray

from workers.analysis.loads.area import Area
from workers.analysis.loads.bearing import bearing_load
from workers.analysis.loads.side import Side, fractions, side_of
from workers.analysis.model import Model
from workers.analysis.selection import select
from workers.errors import Fault, MeshError
from workers.job import (
    Bearing,
    LineLoad,
    Load,
    Named,
    PointForce,
    Pressure,
    Shear,
    Target,
    TotalForce,
    TotalMoment,
    Traction,
)

Array = NDArray[np.float64]

STRAIGHT = 1e-6  # sine of the angle between two normals of a straight side


@dataclass(frozen=True, eq=False)
class NodalLoad:
    """Forces (k, 2) [F] on nodes (k,), each node once."""

    nodes: NDArray[np.int64]
    force: Array


@dataclass(frozen=True, eq=False)
class Places:
    """Where loads act, found once for each target and shared by all load cases."""

    model: Model
    sides: dict[Hashable, Side] = field(default_factory=dict)
    areas: dict[Hashable, Area] = field(default_factory=dict)

    def side(self, load: Load) -> Side:
        """Integration points of the side that a load acts on."""
        target = load.on
        if target not in self.sides:
            self.sides[target] = self._find_side(_required(load), load.pointer)
        return self.sides[target]

    def free_side(self, load: Load) -> Side:
        """A side behind which there is no material."""
        side = self.side(load)
        free = np.isin(_facet_codes(side.facets), _facet_codes(self.model.mesh.boundary))
        if not free.all():
            message = "there is material on both sides here; use `line_load` or `traction`"
            raise MeshError([Fault(load.pointer, message)])
        return side

    def area(self, load: Load) -> Area:
        """Elements that a load acts on; all of them where it does not say."""
        target = load.on
        if target not in self.areas:
            self.areas[target] = self._find_area(target, load.pointer)
        return self.areas[target]

    def _find_side(self, target: Target, pointer: str) -> Side:
        mesh = self.model.mesh
        if isinstance(target, Named) and target.name in mesh.regions:
            message = f"this load acts on a side, and {target.name!r} is a region"
            raise MeshError([Fault(pointer, message)])
        selection = select(mesh, target, pointer)
        if not len(selection.facets):
            message = "this load acts on a side, and there is only a point here; use `force`"
            raise MeshError([Fault(pointer, message)])
        return side_of(self.model, selection.facets)

    def _find_area(self, target: Target | None, pointer: str) -> Area:
        mesh = self.model.mesh
        if target is None:
            return Area(self.model, tuple(np.arange(b.element_count) for b in mesh.blocks))
        selection = select(mesh, target, pointer)
        if not selection.element_count:
            message = "this load acts on an area: name a region, or leave `on` out for the plate"
            raise MeshError([Fault(pointer, message)])
        return Area(self.model, selection.elements)


def _required(load: Load) -> Target:
    if load.on is None:
        raise MeshError([Fault(load.pointer, "this load needs `on`: where does it act?")])
    return load.on


def _facet_codes(facets: NDArray) -> NDArray[np.int64]:
    """One number for each facet (an element has at most four sides)."""
    block, element, side = facets.astype(np.int64).T
    return (block << 48) | (element << 8) | side


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
    selection = select(places.model.mesh, _required(load), load.pointer)
    if len(selection.nodes) != 1:
        message = (
            f"`force` acts at one point, and there are {len(selection.nodes)} nodes here; "
            "use `total_force` to spread it"
        )
        raise MeshError([Fault(load.pointer, message)])
    return NodalLoad(selection.nodes.astype(np.int64), np.array([load.force], float))


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
    if np.abs(side.tangent @ normal).max() > STRAIGHT:
        message = "a moment is spread over a straight side, and this one is not"
        raise MeshError([Fault(load.pointer, message)])
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
    side = places.free_side(load)
    size = _varying(load, np.array([load.start]), np.array([load.end]), side, places)
    return side, -size * side.thickness[:, None] * side.normal


@side_force.register
def _(load: Shear, places: Places) -> tuple[Side, Array]:
    side = places.free_side(load)
    size = _varying(load, np.array([load.start]), np.array([load.end]), side, places)
    return side, size * side.thickness[:, None] * side.tangent


@side_force.register
def _(load: Bearing, places: Places) -> tuple[Side, Array]:
    side = places.free_side(load)
    positions = places.model.mesh.nodes[side.nodes]
    return side, bearing_load(side, positions, load.force, load.pointer)


def _varying(load: Load, start: Array, end: Array, side: Side, places: Places) -> Array:
    """Value at each point of the side, (p, components), linear from start to end."""
    if np.array_equal(start, end):
        return np.tile(start.astype(float), (len(side.length), 1))
    fraction = fractions(side, places.model, load.pointer)[:, None]
    return (1.0 - fraction) * start + fraction * end
