"""Where does every load act, and can it? Said without computing any load.

What a load comes to is in `loads/`, which also says what only its figures can tell: a material
without density, a pin's force that part of a hole cannot bear.
"""

from collections.abc import Callable, Hashable, Iterator, Mapping
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from workers.analysis.circle_fit import fit_circle
from workers.analysis.mesh import BrokenChainError, Facets, Mesh
from workers.analysis.selection import Finder, Selection, everything
from workers.analysis.true_normals import facet_normals
from workers.errors import Fault, FaultyError, MeshError
from workers.job import (
    Acceleration,
    Bearing,
    BodyForce,
    Job,
    LineLoad,
    Load,
    Named,
    PointForce,
    Pressure,
    Shear,
    Spin,
    TemperatureChange,
    TotalForce,
    TotalMoment,
    Traction,
)

STRAIGHT = 1e-3  # sine of the angle between two normals; coordinates may be rounded
ROUND = 0.02  # nodes may leave the circle by this part of the radius

Check = Callable[[Load, Selection, Mesh], str | None]


def load_faults(job: Job, finder: Finder) -> Iterator[Fault]:
    """Loads that find no place on the mesh, or the wrong kind of place."""
    places = LoadPlaces(finder)
    for load in (load for case in job.load_cases for load in case.loads):
        try:
            places.find(load)
        except FaultyError as error:
            yield from error.faults


@dataclass(frozen=True, eq=False)
class LoadPlaces:
    """Finds and checks places, each once: hundreds of cases load the same ones."""

    finder: Finder
    known: dict[Hashable, str | None] = field(default_factory=dict)

    def find(self, load: Load) -> Selection:
        """What a load acts on.

        Raises
        ------
        MeshError   there is no such place, or such a load cannot act there.
        """
        if load.on is None:
            if type(load) in ON_AN_AREA:
                return everything(self.finder.mesh)
            message = "this load needs `on`: where does it act?"
            raise MeshError([Fault(load.pointer, message)])
        selection = self.finder.find(load.on, f"{load.pointer}/on")
        key = (type(load), load.on, _varies(load))
        if key not in self.known:
            self.known[key] = _misplaced(load, selection, self.finder.mesh)
        if reason := self.known[key]:
            raise MeshError([Fault(f"{load.pointer}/on", reason)])
        return selection


def _misplaced(load: Load, selection: Selection, mesh: Mesh) -> str | None:
    """Why the load cannot act there, or None."""
    messages = (check(load, selection, mesh) for check in CHECKS[type(load)])
    return next((message for message in messages if message), None)


def _varies(load: Load) -> bool:
    return isinstance(load, VARYING) and not np.array_equal(load.start, load.end)


def _is_a_point(load: Load, selection: Selection, mesh: Mesh) -> str | None:
    count = len(selection.nodes)
    if count == 1:
        return None
    return (
        f"`force` acts at one point, and there are {count} nodes here; `total_force` spreads a "
        "force over a side"
    )


def _is_a_side(load: Load, selection: Selection, mesh: Mesh) -> str | None:
    if isinstance(load.on, Named) and load.on.name in mesh.regions:
        return f"this load acts on a side, and {load.on.name!r} is a region"
    if not len(selection.facets):
        return "this load acts on a side, and there are only points here; `force` acts at a point"
    return None


def _is_border(load: Load, selection: Selection, mesh: Mesh) -> str | None:
    inside = ~_among(selection.facets, mesh.boundary)
    if not inside.any():
        return None
    x, y = mesh.nodes[mesh.facet_ends(selection.facets[inside][:1])[0]].mean(axis=0)
    return (
        f"this load acts on the border of the plate, and there is material on both sides at "
        f"({x:.6g}, {y:.6g}); `line_load` and `traction` may act inside"
    )


def _is_straight(load: Load, selection: Selection, mesh: Mesh) -> str | None:
    normals = facet_normals(mesh, selection.facets).reshape(-1, 2)
    first = normals[0]
    if np.abs(normals[:, 0] * first[1] - normals[:, 1] * first[0]).max() <= STRAIGHT:
        return None
    return "a moment is spread over a straight side, and this one is not"


def _is_round_hole(load: Load, selection: Selection, mesh: Mesh) -> str | None:
    nodes = mesh.nodes[selection.nodes]
    centre, radius = fit_circle(nodes)
    off = np.abs(np.linalg.norm(nodes - centre, axis=1) - radius).max()
    if not np.isfinite(radius) or off > ROUND * radius:
        return "a bearing acts on the wall of a round hole, and this is not one"
    start, end = mesh.nodes[mesh.facet_ends(selection.facets)].transpose(1, 0, 2)
    (ax, ay), (bx, by) = (start - centre).T, (end - centre).T
    # With the material on the left the wall of a hole runs clockwise about its centre.
    if (ax * by > ay * bx).any():
        return "a bearing acts inside a hole, and this side bulges outwards"
    return None


def _is_one_side_if_varying(load: Load, selection: Selection, mesh: Mesh) -> str | None:
    if not _varies(load):
        return None
    try:
        mesh.chain(selection.facets)
    except BrokenChainError as error:
        return f"a load that varies needs one connected side, but {error}; load it in pieces"
    return None


def _is_an_area(load: Load, selection: Selection, mesh: Mesh) -> str | None:
    if selection.element_count:
        return None
    return "this load acts on an area: name a region, or leave `on` out for the whole plate"


def _among(facets: Facets, others: Facets) -> NDArray[np.bool_]:
    """Which facets (f, 3) are among the others."""
    size = np.array([1, 1 << 8, 1 << 40])  # side, element, block
    codes = [f[:, ::-1].astype(np.int64) @ size for f in (facets, others)]
    return np.isin(*codes)


VARYING = (Traction, LineLoad, Pressure, Shear)
ON_AN_AREA = (Acceleration, BodyForce, Spin, TemperatureChange)
CHECKS: Mapping[type[Load], tuple[Check, ...]] = {
    PointForce: (_is_a_point,),
    TotalForce: (_is_a_side,),
    TotalMoment: (_is_a_side, _is_straight),
    Traction: (_is_a_side, _is_one_side_if_varying),
    LineLoad: (_is_a_side, _is_one_side_if_varying),
    Pressure: (_is_a_side, _is_border, _is_one_side_if_varying),
    Shear: (_is_a_side, _is_border, _is_one_side_if_varying),
    Bearing: (_is_a_side, _is_border, _is_round_hole),
    **dict.fromkeys(ON_AN_AREA, (_is_an_area,)),
}
