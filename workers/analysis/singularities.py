"""Where the stress of the model is infinite: found from the geometry, before anything is solved.

At such a place a mesh shows a finite stress that grows without end as the mesh is refined. These
are re-entrant corners, ends of fixed sides and corners between them, corners and ends of a change
of thickness or material, and points at which a single node is loaded or supported. How strong each
is follows from the angles and conditions around it (`wedge.py`).
"""

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from workers.analysis.model import Model
from workers.analysis.neighbourhood import Surroundings
from workers.analysis.sectors import section_at, section_border, sectors_at
from workers.analysis.selection import Finder
from workers.analysis.side_conditions import SideConditions
from workers.analysis.turns import Turns, turns
from workers.analysis.wedge import Condition, Sector, exponent
from workers.job import PointForce, Support

Array = NDArray[np.float64]
Kind = Literal["re-entrant-corner", "fixed-end", "thickness-step", "point-load", "point-support"]

# r^(lambda - 1): above this exponent the stress grows by less than 12 % each time that the elements
# become ten times smaller, which no mesh can tell from a sharp but finite peak.
WEAKEST = 0.95
SHUT = 1e-6  # [rad] an opening of the material this small is the tip of a crack: a full turn


@dataclass(frozen=True, eq=False)
class SingularPlace:
    """A node at which the stress of the model is infinite.

    exponent : lambda; the stress goes as r^(lambda - 1), under a point force as 1/r
    element_size : longest side of an element there [L]
    radius : the neighbourhood in which stress is not reported [L], see `neighbourhood.py`
    support : label of a point support; cases : (c,) load cases in which a point is loaded
    """

    kind: Kind
    node: int
    at: tuple[float, float]
    exponent: float
    element_size: float
    radius: float
    support: str | None = None
    cases: NDArray[np.bool_] | None = None


def find_singular_places(model: Model) -> tuple[SingularPlace, ...]:
    """All places of a model at which its stress is infinite."""
    finder = Finder(model.mesh)
    mesh = model.mesh
    boundary = turns(mesh, mesh.boundary)
    surroundings = Surroundings.of(model, boundary)

    def place(kind: Kind, node: int, strength: float, **more: object) -> SingularPlace:
        x, y = mesh.nodes[node].tolist()
        size = surroundings.element_size(node)
        return SingularPlace(
            kind, node, (x, y), strength, size, surroundings.radius(node), **more  # type: ignore[arg-type]
        )  # fmt: skip

    found = [place(*corner) for corner in _corners(model, boundary, finder)]
    found += [
        place("point-load", node, 0.0, cases=cases)
        for node, cases in _point_loads(model, finder).items()
    ]
    found += [
        place("point-support", int(node), 0.0, support=support.label)
        for support in model.job.supports
        for node in _point_supported(support, finder)
    ]
    return tuple(found)


# --- single nodes --------------------------------------------------------------------------------


def _point_loads(model: Model, finder: Finder) -> Mapping[int, NDArray[np.bool_]]:
    """Loaded nodes, and the cases in which the forces on each do not cancel."""
    cases = model.job.load_cases
    force: dict[int, Array] = {}
    for number, case in enumerate(cases):
        for load in case.loads:
            if isinstance(load, PointForce) and load.on is not None:
                for node in finder.find(load.on, f"{load.pointer}/on").nodes.tolist():
                    force.setdefault(node, np.zeros((len(cases), 2)))[number] += load.force
    return {node: np.any(by_case, axis=1) for node, by_case in force.items() if by_case.any()}


def _point_supported(support: Support, finder: Finder) -> NDArray[np.int32]:
    """Nodes that a support holds one by one."""
    caught = finder.find(support.on, f"{support.pointer}/on")
    if len(caught.facets) or caught.element_count:
        return np.empty(0, np.int32)
    return caught.nodes


# --- corners -------------------------------------------------------------------------------------


def _corners(model: Model, boundary: Turns, finder: Finder) -> Iterator[tuple[Kind, int, float]]:
    """Kind, node and exponent of every corner with infinite stress."""
    mesh = model.mesh
    border = section_border(model)
    mixed = np.isin(boundary.node, mesh.facet_ends(border))
    conditions = SideConditions.of(model.job, finder)
    before = conditions.at(boundary.incoming, end=True)
    after = conditions.at(boundary.outgoing, end=False)
    changes = np.array([one != other for one, other in zip(before, after, strict=True)], bool)
    for row in np.flatnonzero(boundary.is_corner | changes | mixed):
        node, sides = int(boundary.node[row]), (after[row], before[row])
        angle = float(boundary.angle[row])
        sectors = [Sector(angle if angle > SHUT else 2 * np.pi, *section_at(model, node))]
        if mixed[row]:
            sectors = sectors_at(model, node)
        strength = exponent(sectors, sides)
        if strength is not None and strength <= WEAKEST:
            yield _kind(len(sectors), sides), node, strength
    inner = turns(mesh, border)
    for node in np.setdiff1d(inner.node[inner.is_corner], boundary.node).tolist():
        strength = exponent(sectors_at(model, node), None)
        if strength is not None and strength <= WEAKEST:
            yield "thickness-step", node, strength


def _kind(sectors: int, sides: tuple[Condition, Condition]) -> Kind:
    if sides != ("free", "free"):
        return "fixed-end"
    return "thickness-step" if sectors > 1 else "re-entrant-corner"
