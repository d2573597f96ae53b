"""Stiffness around a node, as sectors; and the lines across which it changes."""

import numpy as np
from numpy.typing import NDArray

from workers.analysis.mesh import Facets, Mesh
from workers.analysis.model import Model
from workers.analysis.wedge import Sector

Array = NDArray[np.float64]
Section = tuple[float, float]  # E t [F/L] and Poisson's ratio
Piece = tuple[float, float, Section]  # of an element at a node: first direction, angle [rad]

SAME = 1e-6  # [rad] directions that count as one


def section_border(model: Model) -> Facets:
    """Facets inside the plate across which stiffness changes, seen from the stiffer side."""
    one, other = model.mesh.shared_facets()
    here, there = _stiffness_of(model, one), _stiffness_of(model, other)
    differ = (here != there).any(axis=1)
    stiffer = (here[:, 0] >= there[:, 0])[:, None]
    return np.where(stiffer, one, other)[differ]


def _stiffness_of(model: Model, facets: Facets) -> Array:
    """Stiffness E t and Poisson's ratio of the element behind each facet, (f, 2)."""
    values = np.empty((len(facets), 2))
    for number, section in enumerate(model.sections):
        rows = facets[:, 0] == number
        elements = facets[rows, 1]
        values[rows, 0] = section.youngs_modulus[elements] * section.thickness[elements]
        values[rows, 1] = section.poissons_ratio[elements]
    return values


def section_at(model: Model, node: int) -> Section:
    """E t and Poisson's ratio at a node around which they are the same."""
    return _around(model, node)[0][2]


def sectors_at(model: Model, node: int) -> list[Sector]:
    """Sectors around a node, counter-clockwise; on the boundary from the outgoing side on."""
    pieces = sorted(_around(model, node))
    pairs = list(zip(pieces[-1:] + pieces[:-1], pieces, strict=True))
    # Start behind a gap, or else at a change of section, so that no sector is cut in two.
    gaps = [k for k, (before, after) in enumerate(pairs) if _apart(before, after)]
    changes = [k for k, (before, after) in enumerate(pairs) if before[2] != after[2]]
    first = (gaps or changes or [0])[0]
    sectors: list[Sector] = []
    for _, width, section in pieces[first:] + pieces[:first]:
        if sectors and sectors[-1][1:] == section:
            sectors[-1] = sectors[-1]._replace(angle=sectors[-1].angle + width)
        else:
            sectors.append(Sector(width, *section))
    return sectors


def _apart(before: Piece, after: Piece) -> bool:
    """Whether there is a gap between two elements that follow each other around a node."""
    return bool(np.mod(after[0] - before[0] - before[1] + SAME, 2 * np.pi) > 2 * SAME)


def _around(model: Model, node: int) -> list[Piece]:
    """First direction, angle and section of every element that has a corner in a node."""
    found = []
    for block, sections in zip(model.mesh.blocks, model.sections, strict=True):
        corners = block.element.corners
        elements, place = np.nonzero(block.connectivity[:, :corners] == node)
        for element, corner in zip(elements.tolist(), place.tolist(), strict=True):
            own = block.connectivity[element]
            leaving = _tangent(model.mesh, own, block.element.sides[corner], corner)
            back = _tangent(model.mesh, own, block.element.sides[corner - 1], corner)
            start = float(np.arctan2(leaving[1], leaving[0]))
            width = float(np.mod(np.arctan2(back[1], back[0]) - start, 2 * np.pi))
            stiffness = sections.youngs_modulus[element] * sections.thickness[element]
            found.append(
                (start, width, (float(stiffness), float(sections.poissons_ratio[element])))
            )
    return found


def _tangent(mesh: Mesh, own: NDArray[np.int32], side: tuple[int, ...], corner: int) -> Array:
    """Direction away from a corner of an element along one of its sides, (2,)."""
    other = side[1] if side[0] == corner else side[0]
    a, b = mesh.nodes[own[corner]], mesh.nodes[own[other]]
    return b - a if len(side) == 2 else 4 * mesh.nodes[own[side[2]]] - 3 * a - b
