"""The field points whose stress is not reported, state by state.

A corner is singular in every state; a point only where a force acts in it.
"""

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import KDTree

from workers.analysis.combine import States, superpose
from workers.analysis.field_mesh import FieldMesh
from workers.analysis.singularities import SingularPlace, find_singular_places
from workers.analysis.solution import Solution

Array = NDArray[np.float64]
Numbers = NDArray[np.intp]

# Of the largest force of any support on any node: a smaller one only removes a free motion.
HOLDS = 1e-6


class ActiveZones(NamedTuple):
    """The zones in k states.

    points : (r,) numbers of the field points that lie in any zone, ascending
    excluded : (r, k) whether the stress there is not to be reported
    """

    points: Numbers
    excluded: NDArray[np.bool_]


@dataclass(frozen=True, eq=False)
class Zones:
    """Neighbourhoods of all singular places on a field mesh.

    points : for each place the numbers of the field points within its radius
    active : (places, s) in which states the place is singular
    """

    places: tuple[SingularPlace, ...]
    points: tuple[Numbers, ...]
    active: NDArray[np.bool_]

    @classmethod
    def build(cls, solution: Solution, field_mesh: FieldMesh, states: States) -> "Zones":
        places = find_singular_places(solution.model)
        if not places:
            return cls((), (), np.zeros((0, len(states)), bool))
        tree = KDTree(field_mesh.points)
        points = tuple(
            np.sort(tree.query_ball_point(place.at, place.radius)).astype(np.intp)
            for place in places
        )
        return cls(places, points, _activity(solution, states, places))

    def within(self, columns: range) -> ActiveZones:
        """What is excluded in some states."""
        if not self.places:
            return ActiveZones(np.empty(0, np.intp), np.zeros((0, len(columns)), bool))
        points = np.unique(np.concatenate(self.points))
        excluded = np.zeros((len(points), len(columns)), bool)
        for own, active in zip(self.points, self.active[:, columns], strict=True):
            excluded[np.searchsorted(points, own)] |= active
        return ActiveZones(points, excluded)

    def place_of(self, field_mesh: FieldMesh, point: int, column: int) -> SingularPlace:
        """The nearest of the places in whose zones an excluded point lies."""
        own = [
            place
            for place, points, active in zip(self.places, self.points, self.active, strict=True)
            if active[column] and point in points
        ]
        here = field_mesh.points[point]
        return min(own, key=lambda place: float(np.linalg.norm(here - place.at)))


def _activity(
    solution: Solution, states: States, places: tuple[SingularPlace, ...]
) -> NDArray[np.bool_]:
    active = np.ones((len(places), len(states)), bool)
    held = [place for place in places if place.support is not None]
    enough = HOLDS * _largest_force(solution, states) if held else np.zeros(len(states))
    for row, place in enumerate(places):
        if place.cases is not None:
            active[row] = (states.factors[place.cases] != 0).any(axis=0)
        if place.support is not None:
            active[row] = _force_at(solution, states, place) > enough
    return active


def _largest_force(solution: Solution, states: States) -> Array:
    """Of any support on any node, by state (s,) [F]."""
    largest = np.zeros(len(states))
    for support in solution.support_forces:
        force = superpose(support.force, states, range(len(states)))
        if len(force):
            largest = np.maximum(largest, np.linalg.norm(force, axis=1).max(axis=0))
    return largest


def _force_at(solution: Solution, states: States, place: SingularPlace) -> Array:
    """Of a point support on its node, by state (s,) [F]."""
    support = next(s for s in solution.support_forces if s.label == place.support)
    own = support.force[support.nodes == place.node]
    return np.linalg.norm(superpose(own, states, range(len(states))), axis=1).sum(axis=0)
