"""Loads on the elements that a straight cut crosses: how much of them lies left of the cut.

Nodal loads have forgotten where in an element a load acts. For the elements with nodes on both
sides of a cut (see `section.py`) the distributed loads are therefore integrated once more, over
the part left of the line, and their shares at the left nodes are taken off again. The difference
is exact on straight-sided elements: side loads are polynomials along the side, body forces are
linear in x and y, so that their resultant acts at the centroid of the clipped element.
"""

from collections.abc import Hashable, Iterator
from dataclasses import dataclass, field
from functools import singledispatchmethod
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from elements.contract import ElementType
from elements.quadrature import line
from workers.analysis.loads.kinds import Places, side_force
from workers.analysis.loads.side import Side
from workers.analysis.model import Model
from workers.analysis.section import Section
from workers.job import Acceleration, BodyForce, Load, PointForce, Spin, TemperatureChange

Array = NDArray[np.float64]

CHORDS = 16  # for each curved side of a clipped element


@dataclass(frozen=True, eq=False)
class CutLoads:
    """Distributed loads on the straddling elements of one section.

    Targets are looked up once and shared by all load cases.
    """

    places: Places
    section: Section
    areas: dict[Hashable, "_Clipped"] = field(default_factory=dict)

    def beyond_nodes(self) -> Array:
        """Loads left of the line less what the left nodes hold of them, (3, c).

        Force x, y [F] and moment about the middle of the cut [F L], by load case.
        """
        cases = self.places.model.job.load_cases
        total = np.zeros((3, len(cases)))
        if any(len(elements) for elements in self.section.straddling):
            for number, case in enumerate(cases):
                for load in case.loads:
                    total[:, number] += self._difference(load)
        return total

    @singledispatchmethod
    def _difference(self, load: Load) -> Array:
        side, force = side_force(load, self.places)
        return sum(
            (self._side_difference(side, force, row) for row in self._straddling_facets(side)),
            start=np.zeros(3),
        )

    @_difference.register(PointForce | TemperatureChange)
    def _(self, load: Load) -> Array:
        return np.zeros(3)  # one acts at a node, the other has no resultant

    @_difference.register
    def _(self, load: BodyForce) -> Array:
        return self._clipped(load).volume @ np.array([*load.force, 0.0])

    @_difference.register
    def _(self, load: Acceleration) -> Array:
        return self._clipped(load).mass @ np.array([*load.acceleration, 0.0])

    @_difference.register
    def _(self, load: Spin) -> Array:
        x, y = self.section.middle - load.about
        return self._clipped(load).mass @ (load.speed**2 * np.array([x, y, 1.0]))

    def _clipped(self, load: Load) -> "_Clipped":
        if load.on not in self.areas:
            area = self.places.area(load)
            elements = tuple(
                np.intersect1d(*pair)
                for pair in zip(area.elements, self.section.straddling, strict=True)
            )
            self.areas[load.on] = _clip_elements(self.places.model, self.section, elements)
        return self.areas[load.on]

    def _straddling_facets(self, side: Side) -> NDArray[np.intp]:
        found = np.zeros(len(side.facets), bool)
        for number, elements in enumerate(self.section.straddling):
            found |= (side.facets[:, 0] == number) & np.isin(side.facets[:, 1], elements)
        return np.flatnonzero(found)

    def _side_difference(self, side: Side, force: Array, row: int) -> Array:
        """What one facet carries left of the line, less its share at the left nodes, (3,)."""
        number, chosen, local = side.facets[row]
        block = self.places.model.mesh.blocks[number]
        nodes = block.connectivity[chosen]
        coords = self.places.model.mesh.nodes[nodes]
        at, weights = block.element.side_rule()
        points = side.facet == row
        density = force[points] * (side.length[points] / weights)[:, None]  # per ds of [-1, 1]
        shape = _side_shape(block.element, local, at)
        middle = self.section.middle
        on_left = np.where(self.section.node_on_left[nodes], 1.0, 0.0)
        nodal = (shape * on_left).T @ (weights[:, None] * density)
        difference = -_resultant(coords - middle, nodal)
        for low, high in _left_parts(block.element, local, self.section.distance[nodes]):
            s, w = line(len(at) + 2)
            s, w = (low + high + (high - low) * s) / 2, (high - low) / 2 * w
            position = _side_shape(block.element, local, s) @ coords
            spread = _lagrange(at, s) @ density
            difference += _resultant(position - middle, w[:, None] * spread)
        return difference


# --- side loads ----------------------------------------------------------------------------------


def _side_shape(element: ElementType, local: int, s: Array) -> Array:
    """Shape functions of all nodes at places s in [-1, 1] of a side, (q, n)."""
    a, b = element.sides[local][:2]
    natural = element.natural_nodes
    return element.shape_functions(
        ((1 - s)[:, None] * natural[a] + (1 + s)[:, None] * natural[b]) / 2
    )


def _left_parts(element: ElementType, local: int, distance: Array) -> Iterator[tuple[float, float]]:
    """Parts of [-1, 1] in which a side, straight or parabolic, is left of the line."""
    start, middle, end = _side_shape(element, local, np.array([-1.0, 0.0, 1.0])) @ distance
    roots = np.roots([(start + end) / 2 - middle, (end - start) / 2, middle])
    inside = np.sort(roots[np.isreal(roots)].real)
    ends = [-1.0, *inside[np.abs(inside) < 1], 1.0]
    for low, high in pairwise(ends):
        if _side_shape(element, local, np.array([(low + high) / 2])) @ distance <= 0:
            yield low, high


def _lagrange(at: Array, s: Array) -> Array:
    """Values at s (r,) of the polynomials that are one at one of `at` (q,), zero at the others."""
    columns = [
        np.prod([(s - b) / (a - b) for b in np.delete(at, i)], axis=0) for i, a in enumerate(at)
    ]
    return np.column_stack(columns)


def _resultant(arm: Array, force: Array) -> Array:
    """Force and moment (3,) of forces (k, 2) at (k, 2)."""
    moment = (arm[:, 0] * force[:, 1] - arm[:, 1] * force[:, 0]).sum()
    return np.array([*force.sum(axis=0), moment])


# --- body forces ---------------------------------------------------------------------------------


@dataclass(frozen=True, eq=False)
class _Clipped:
    """Operators (3, 3) that give the difference for a linear force per volume, or per mass.

    The force is its value at the middle of the cut (x, y) and its slope: b + slope (x - middle).
    """

    volume: Array
    mass: Array


def _clip_elements(
    model: Model, section: Section, elements: tuple[NDArray[np.intp], ...]
) -> _Clipped:
    volume, mass = np.zeros((3, 3)), np.zeros((3, 3))
    for number, chosen in enumerate(elements):
        block, properties = model.mesh.blocks[number], model.sections[number]
        for chosen_element in chosen:
            nodes = block.connectivity[chosen_element]
            arm = model.mesh.nodes[nodes] - section.middle
            part = _left_area(block.element, arm, section.distance[nodes])
            part -= _left_nodes(block.element, arm, section.node_on_left[nodes])
            part *= properties.thickness[chosen_element]
            volume += part
            mass += properties.density[chosen_element] * part
    return _Clipped(volume, mass)


def _left_area(element: ElementType, arm: Array, distance: Array) -> Array:
    """Operator of the part of an element left of the line, for unit thickness, (3, 3)."""
    s = np.linspace(-1, 1, CHORDS if element.order == 2 else 1, endpoint=False)
    outline = np.concatenate([_side_shape(element, i, s) for i in range(element.corners)])
    whole, _ = _area_and_moment(outline @ arm)
    area, moment = _area_and_moment(_clip(outline @ arm, outline @ distance))
    rule = element.load_rule()
    _, det_J = element.jacobian(arm[None], rule.points)
    exact = float(det_J[0] @ rule.weights) / whole  # chords miss a little of curved sides
    return exact * _operator(area, moment, moment, 0.0)


def _left_nodes(element: ElementType, arm: Array, on_left: NDArray[np.bool_]) -> Array:
    """Operator of the nodal forces at the left nodes, for unit thickness, (3, 3)."""
    points, _ = element.load_rule()
    position = element.shape_functions(points) @ arm
    one = np.ones(1)
    share = element.body_load(arm[None], one, np.ones((1, len(points), 2)))[0, on_left, 0]
    slope = element.body_load(arm[None], one, position[None])[0, on_left]
    at = arm[on_left]
    turning = (at[:, 0] * slope[:, 1] - at[:, 1] * slope[:, 0]).sum()
    return _operator(share.sum(), slope.sum(axis=0), share @ at, turning)


def _operator(size: float, of_slope: Array, of_arm: Array, turning: float) -> Array:
    return np.array(
        [
            [size, 0.0, of_slope[0]],
            [0.0, size, of_slope[1]],
            [-of_arm[1], of_arm[0], turning],
        ]
    )


def _clip(polygon: Array, distance: Array) -> Array:
    """The part of a polygon (k, 2) where the distance from the line (k,) is not positive.

    Sutherland & Hodgman, "Reentrant polygon clipping", Comm. ACM 17 (1974), for one line.
    """
    kept = []
    for i, (point, off) in enumerate(zip(polygon, distance, strict=True)):
        before, off_before = polygon[i - 1], distance[i - 1]
        if off * off_before < 0:
            kept.append(before + off_before / (off_before - off) * (point - before))
        if off <= 0:
            kept.append(point)
    return np.array(kept).reshape(-1, 2)


def _area_and_moment(polygon: Array) -> tuple[float, Array]:
    """Area and first moments (2,) of a polygon."""
    # From one of its corners: the products of large coordinates would lose the area.
    corner = polygon[:1]
    seen = polygon - corner
    following = np.roll(seen, -1, axis=0)
    cross = seen[:, 0] * following[:, 1] - following[:, 0] * seen[:, 1]
    area = cross.sum() / 2
    return area, cross @ (seen + following) / 6 + area * corner.sum(axis=0)
