"""Sizes for a free mesh from the elements of the last one.

The library follows a field only where it is told often enough: about seven places an element give a
count within a tenth of the ideal. Sizes are of elements of equal sides.
"""

import math

import numpy as np
from numpy.typing import NDArray

from workers.analysis.mesh import Mesh
from workers.analysis.meshing.plan import Plan

Array = NDArray[np.float64]

# Area over size squared: equilateral triangles; quadrilaterals as they come from pairs of
# triangles of the size, each split in four (measured).
AREA = {3: 0.433, 4: 0.75}

# Growth over distance. A mesh that grows more slowly than the errors ask for spends its elements
# on the way: at 2 % a panel with a corner took half as many again with 0.25; from 0.8 on the
# quality falls.
GRADING = 0.6
# An arc has the elements that the errors ask for; as few as that still follow it.
PER_RADIUS = 0.7
AROUND = 12  # places to a ring


def element_areas(mesh: Mesh) -> Array:
    """Area between the corners of every element, block after block, (m,) [L^2]."""
    areas = []
    for number, block in enumerate(mesh.blocks):
        corners = mesh.coords(number)[:, : block.element.corners]
        # From the first corner: the products of large coordinates would lose the area.
        x, y = np.moveaxis(corners - corners[:, :1], 2, 0)
        areas.append((x * np.roll(y, -1, axis=1) - np.roll(x, -1, axis=1) * y).sum(axis=1) / 2)
    return np.concatenate(areas)


def element_sizes(mesh: Mesh) -> Array:
    """Side of the regular element with the same area, (m,) [L]."""
    shape = np.repeat(
        [AREA[block.element.corners] for block in mesh.blocks],
        [block.element_count for block in mesh.blocks],
    )
    return np.sqrt(element_areas(mesh) / shape)


def size_points(mesh: Mesh, sizes: Array) -> Array:
    """x, y and size at centre, sides and towards the corners of every element, (k, 3) [L]."""
    points, first = [], 0
    for number, block in enumerate(mesh.blocks):
        own = sizes[first : first + block.element_count]
        first += block.element_count
        corners = mesh.coords(number)[:, : block.element.corners]
        centre = corners.mean(axis=1, keepdims=True)
        places = np.concatenate(
            (centre, (2 * corners + centre) / 3, (corners + np.roll(corners, 1, axis=1)) / 2),
            axis=1,
        )
        points.append(
            np.concatenate((places, np.broadcast_to(own[:, None, None], (*places.shape[:2], 1))), 2)
        )
    return np.concatenate([part.reshape(-1, 3) for part in points])


def rings(corner: Array, until: float) -> Array:
    """x, y and size (3,) of a corner, and rings about it up to a size, (k, 3) [L].

    A lone point would leave large elements beside small ones in the same corner.
    """
    place, size = corner[:2], float(corner[2])
    count = max(0, math.ceil(math.log2(max(until / (GRADING * size), 1.0))))
    radii = size * 2.0 ** np.arange(count)
    angles = np.arange(AROUND) * 2 * np.pi / AROUND
    arms = np.stack((np.cos(angles), np.sin(angles)), axis=1)
    places = place + (radii[:, None, None] * arms).reshape(-1, 2)
    sizes = np.repeat(size + GRADING * radii, AROUND)
    return np.concatenate((corner[None], np.column_stack((places, sizes))))


def follow(plan: Plan, points: Array, elements: float) -> Plan:
    """The plan with a size field on top of what the job asks for; elements : expected."""
    local = points.copy()
    local[:, :2] = (points[:, :2] - plan.frame.middle) / plan.frame.scale
    local[:, 2] /= plan.frame.scale
    sizes = plan.sizes._replace(
        points=np.concatenate((plan.sizes.points, local)),
        grading=GRADING / 2,  # measured on coarse meshes, whose elements are split once
        per_radius=PER_RADIUS,
    )
    nodes = plan.nodes / plan.elements * elements
    return plan._replace(sizes=sizes, elements=elements, nodes=nodes)
