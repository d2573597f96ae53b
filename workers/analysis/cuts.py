"""Normal force, shear force and moment that a cut carries, from nodal forces.

The forces that the elements left of the stepped section (see `section.py`) put on its nodes are
those that the equations of equilibrium were solved for, so they balance the loads to the accuracy
of the solution; stresses integrated along a line would not. What acts between the steps and the
straight line is added by statics, so that the figures are those of the straight cut:

- point forces and reactions where they act; those on the line itself belong to the left part;
- forces spread over a side or a volume with the part of them that lies left of the line.

All figures are forces of the right part on the left part, left and right as seen from the start
of the cut to its end: `normal` positive in tension; `shear` positive towards the end of the cut;
`moment` about the middle of the cut, counter-clockwise positive, so that it is positive when it
pulls at the start of the cut.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workers.analysis.cut_loads import CutLoads
from workers.analysis.loads.kinds import Places
from workers.analysis.model import Model
from workers.analysis.plane_stress import thermal_strain
from workers.analysis.recovery import Temperature
from workers.analysis.resultants import resultant
from workers.analysis.section import Section, find_section
from workers.analysis.solution import Solution
from workers.job import Cut

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class CutForces:
    """What a cut carries in the c load cases.

    about (2,) [L]; normal, shear (c,) [F]; moment (c,) about there [F L].
    """

    about: Array
    normal: Array
    shear: Array
    moment: Array


def cut_forces(solution: Solution, cut: Cut, places: Places | None = None) -> CutForces:
    """Forces through one cut.

    places : where the loads act; share it between cuts.

    Raises
    ------
    MeshError   see `find_section`.
    """
    section = find_section(solution.model.mesh, cut)
    carried = (
        _forces_of_left_elements(solution, section)
        - _nodal_loads_between(solution, section)
        - CutLoads(places or Places(solution.model), section).beyond_nodes()
    )
    force = carried[:2]
    return CutForces(section.middle, section.normal @ force, section.direction @ force, carried[2])


def _forces_of_left_elements(solution: Solution, section: Section) -> Array:
    """Resultant (3, c) of what the left elements need at the nodes of the section."""
    model = solution.model
    at_section = np.zeros(model.mesh.node_count, bool)
    at_section[section.nodes] = True
    total = np.zeros((3, len(solution.cases)))
    for number, block in enumerate(model.mesh.blocks):
        meets = at_section[block.connectivity]
        elements = np.flatnonzero(section.left[number] & meets.any(axis=1))
        if not len(elements):
            continue
        force = element_forces(model, number, elements, solution.displacement, solution.temperature)
        kept = meets[elements]
        nodes = block.connectivity[elements][kept]
        total += resultant(model.mesh.nodes[nodes], force[kept], section.middle)
    return total


def element_forces(
    model: Model,
    number: int,
    elements: NDArray[np.intp],
    displacement: Array,
    temperature: Temperature = None,
) -> Array:
    """Forces that elements need at their nodes to be deformed as they are, (e, n, 2, c) [F].

    K u less the forces of free thermal expansion: with them every element is in equilibrium.
    """
    block, section = model.mesh.blocks[number], model.sections[number]
    nodes = block.connectivity[elements]
    coords, D, t = (
        model.mesh.nodes[nodes],
        section.constitutive[elements],
        section.thickness[elements],
    )
    cases = displacement.shape[2]
    stiffness = block.element.stiffness(coords, D, t)
    u = displacement[nodes].reshape(len(elements), stiffness.shape[1], cases)
    force = np.matmul(stiffness, u).reshape(len(elements), -1, 2, cases)
    if temperature is not None:
        change = temperature[number][elements]
        expansion = np.where(change.any(axis=1), section.thermal_expansion[elements], 0.0)
        points, _ = block.element.stiffness_rule()
        strain = np.zeros((len(elements), len(points), 3))
        strain[:] = thermal_strain(expansion, 1.0)[:, None]
        free = block.element.initial_strain_load(coords, D, t, strain)
        force -= free[..., None] * change[:, None, None, :]
    return force


def _nodal_loads_between(solution: Solution, section: Section) -> Array:
    """Nodal loads and reactions left of the straight line less those left of the steps, (3, c)."""
    model = solution.model
    count = model.mesh.node_count
    with_left = np.zeros(count, bool)
    near = np.zeros(count, bool)
    near[section.nodes] = True
    for number, block in enumerate(model.mesh.blocks):
        with_left[block.connectivity[section.left[number]]] = True
        near[block.connectivity[section.straddling[number]]] = True
    left_of_steps = with_left.astype(float)
    left_of_steps[section.nodes] = 0.0
    sign = np.where(near, section.node_on_left - left_of_steps, 0.0)
    nodes = np.flatnonzero(sign)
    acting = solution.loads.forces.at(nodes)
    for support in solution.support_forces:
        _, at, of_support = np.intersect1d(nodes, support.nodes, return_indices=True)
        acting[at] += support.force[of_support]
    return resultant(model.mesh.nodes[nodes], sign[nodes, None, None] * acting, section.middle)
