"""Reactions of the supports, and whether loads and reactions balance.

Moments are counter-clockwise positive. Everything is linear in the loads, so these are figures of
the c load cases; `combine.superpose` makes those of the combinations.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workers.analysis.mesh import Mesh
from workers.analysis.solution import Solution

Array = NDArray[np.float64]

NODES_AT_ONCE = 1024  # their forces in all cases stay in the cache


@dataclass(frozen=True, eq=False)
class Reaction:
    """What a support does to the plate.

    about (2,) : centroid of its nodes [L]; resultant (3, c) : force x, y [F] and moment about
    there [F L].
    """

    label: str
    about: Array
    resultant: Array


@dataclass(frozen=True, eq=False)
class Equilibrium:
    """Loads against reactions, about the centroid of the plate's area.

    about (2,) [L]
    applied, reaction (3, c) : force x, y [F] and moment [F L]
    size (2, c) : sums of the sizes of all nodal forces [F] and of force times arm [F L], with
        what imposed strain and movement would call up (see `_imposed`)
    """

    about: Array
    applied: Array
    reaction: Array
    size: Array


def reactions(solution: Solution) -> tuple[Reaction, ...]:
    """Resultant of each support, springs included."""
    nodes = solution.model.mesh.nodes
    found = []
    for support in solution.support_forces:
        at = nodes[support.nodes]
        # One that holds nothing that others do not hold has no node of its own, and no force.
        about = at.mean(axis=0) if len(at) else centroid(solution.model.mesh)
        found.append(Reaction(support.label, about, resultant(at, support.force, about)))
    return tuple(found)


def equilibrium(solution: Solution) -> Equilibrium:
    """Resultants of all loads and of all reactions.

    Temperature changes have no resultant and do not appear.
    """
    mesh = solution.model.mesh
    about = centroid(mesh)
    parts = [(mesh.nodes[s.nodes], s.force) for s in solution.support_forces]
    reaction = np.zeros((3, len(solution.cases)))
    applied, size = np.zeros((3, len(solution.cases))), np.zeros((2, len(solution.cases)))
    for part in solution.parts():
        force = solution.loads.forces.of_cases(part)
        applied[:, part] = resultant(mesh.nodes, force, about)
        size[:, part] = _size(mesh.nodes - about, force)
    size += _imposed(solution) * np.array([[1.0], [mesh.diagonal]])
    for at, force in parts:
        reaction += resultant(at, force, about)
        size += _size(at - about, force)
    return Equilibrium(about, applied, reaction, size)


def imbalance(applied: Array, reaction: Array, size: Array) -> Array:
    """What is left of loads plus reactions, relative, (3, k), (3, k), (2, k) -> (k,).

    The largest of force x, force y and moment, each over the sizes of what was summed; zero where
    nothing acts.
    """
    left = np.abs(applied + reaction)
    scale = size[[0, 0, 1]]
    return np.divide(left, scale, out=np.zeros_like(left), where=scale > 0).max(axis=0)


def resultant(points: Array, force: Array, about: Array) -> Array:
    """Force and moment of nodal forces, (k, 2) and (k, 2, c) -> (3, c)."""
    arm = points - about
    moment = arm[:, 0] @ force[:, 1] - arm[:, 1] @ force[:, 0]
    return np.vstack((force.sum(axis=0), moment))


def centroid(mesh: Mesh) -> Array:
    """Centroid of the area of all elements, (2,) [L]."""
    area, moment = 0.0, np.zeros(2)
    for number, block in enumerate(mesh.blocks):
        points, weights = block.element.load_rule()
        coords = mesh.coords(number)
        _, det_J = block.element.jacobian(coords, points)
        position = np.matmul(block.element.shape_functions(points), coords)
        area += float((det_J @ weights).sum())
        moment += np.einsum("mq,q,mqi->i", det_J, weights, position)
    return moment / area


def _imposed(solution: Solution) -> Array:
    """Force that the cases' temperature changes and settlements could call up, (c,) [F].

    E t (alpha dT d + settlement), d the plate's diagonal. A plate that is free to follow them has
    no forces but rounding, which must be measured against something.
    """
    model = solution.model
    stiffness, expansion = 0.0, np.zeros(len(solution.cases))
    for number, section in enumerate(model.sections):
        stiffness = max(stiffness, float((section.youngs_modulus * section.thickness).max()))
        if solution.temperature is not None:
            change = solution.temperature[number]
            alpha = np.where(change.any(axis=1), section.thermal_expansion, 0.0)
            expansion = np.maximum(expansion, np.abs(alpha[:, None] * change).max(axis=0))
    settlement = np.zeros(len(solution.cases))
    for support in model.job.supports:
        given = (support.ux, support.uy, support.normal, support.displacement)
        largest = max(abs(value or 0.0) for value in given)
        acts = np.array([support.case in (None, case) for case in solution.cases])
        settlement = np.maximum(settlement, largest * acts)
    return stiffness * (expansion * model.mesh.diagonal + settlement)


def _size(arm: Array, force: Array) -> Array:
    """Sums of |force| and of |arm| |force|, |.| the sum of the components' sizes, (2, c)."""
    reach = np.abs(arm).sum(axis=1)
    total = np.zeros((2, force.shape[2]))
    for start in range(0, len(force), NODES_AT_ONCE):
        part = slice(start, start + NODES_AT_ONCE)
        size = np.abs(force[part]).sum(axis=1)
        total[0] += size.sum(axis=0)
        total[1] += reach[part] @ size
    return total
