"""Which rigid motions do the supports leave free, part by part?

Each part of the plate has three rigid motions. A support takes away one wherever it holds a node in
a direction; what no row touches stays free. Places and directions of the supports decide alone, so
that this is known before anything is solved.
"""

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from workers.analysis.hinges import linkages, loose_joints
from workers.analysis.mesh import Mesh
from workers.analysis.rigid import Part, at, name_motions, null_space, rigid_rows

Array = NDArray[np.float64]

MOST_SENTENCES = 20


def free_motions(mesh: Mesh, nodes: NDArray, directions: Array) -> list[str]:
    """Say which parts of a supported plate are free to move, and how.

    Parameters
    ----------
    nodes : (r,) int         the node that each support row holds
    directions : (r, 2)      the direction in which it is held, of any length but zero

    Returns
    -------
    list of str   one sentence for each free motion, such as "part 2 of 2 (12 nodes around
        (40, 10)) can move in x"; empty when everything is held
    """
    nodes = np.asarray(nodes, np.intp)
    unit = directions / np.linalg.norm(directions, axis=1, keepdims=True)
    joined = {linkage.part: linkage for linkage in linkages(mesh)}
    rows_of = _grouped(mesh.components[nodes], mesh.component_count)
    sentences = []
    for number, (part, rows) in enumerate(zip(parts_of(mesh), rows_of, strict=True)):
        own = nodes[rows]
        held = rigid_rows(mesh.nodes[own], unit[rows], part)
        motions = name_motions(null_space(held), part)
        if number in joined:
            motions += loose_joints(mesh, joined[number], part, own, held)
        sentences += [f"{_name(number, part, mesh)} {motion}" for motion in motions]
    if (more := len(sentences) - MOST_SENTENCES) > 0:
        sentences[MOST_SENTENCES:] = [f"the plate has {more} more free motions"]
    return sentences


def parts_of(mesh: Mesh) -> Iterator[Part]:
    """The connected parts of the plate, as numbered in `Mesh.components`."""
    for numbers in _grouped(mesh.components, mesh.component_count):
        points = mesh.nodes[numbers]
        low, high = points.min(axis=0), points.max(axis=0)
        yield Part(len(points), points.mean(axis=0), float(np.linalg.norm(high - low)) / 2)


def _grouped(labels: NDArray, count: int) -> list[NDArray[np.intp]]:
    """Positions of each label, in order."""
    order = np.argsort(labels, kind="stable")
    return np.split(order, np.searchsorted(labels[order], np.arange(1, count)))


def _name(number: int, part: Part, mesh: Mesh) -> str:
    if mesh.component_count == 1:
        return "the plate"
    return (
        f"part {number + 1} of {mesh.component_count} ({part.nodes} nodes around {at(part.centre)})"
    )
