"""Pieces of the plate that hang together at single nodes only, as if by hinges.

Elements that share no side but a corner can turn against each other there. Whether they are held
all the same depends on the supports: a small system of rigid pieces and hinges tells.
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workers.analysis.connected import label_components
from workers.analysis.mesh import Mesh
from workers.analysis.rigid import Part, at, null_space, rigid_rows

Array = NDArray[np.float64]

MOST_PIECES = 300  # three unknowns each; the eigenvalues of 900 take a second


@dataclass(frozen=True, eq=False)
class Linkage:
    """The pieces of one part that hangs together at single nodes.

    part : number of the part, as in `Mesh.components`
    pieces : (p,) numbers of its pieces
    piece_of : (N,) a piece that each node of the mesh belongs to
    hinges : (h, 3) node, piece, piece: at the node the two pieces move alike
    """

    part: int
    pieces: NDArray[np.intp]
    piece_of: NDArray[np.intp]
    hinges: NDArray[np.intp]


def linkages(mesh: Mesh) -> list[Linkage]:
    """Parts made of several pieces; most meshes have none, and that is found out fast."""
    starts = np.bincount(mesh.facet_ends(mesh.boundary)[:, 0], minlength=mesh.node_count)
    if (starts < 2).all():
        return []
    piece_of_element = _pieces(mesh)
    piece_of = np.zeros(mesh.node_count, np.intp)
    members = []
    first = 0
    for block in mesh.blocks:
        pieces = piece_of_element[first : first + block.element_count]
        corners = block.connectivity[:, : block.element.corners]
        piece_of[block.connectivity] = pieces[:, None]
        pinched = starts[corners] > 1
        members.append(np.stack((corners[pinched], np.nonzero(pinched)[0]), axis=1))
        members[-1][:, 1] = pieces[members[-1][:, 1]]
        first += block.element_count
    pairs = np.unique(np.concatenate(members), axis=0).astype(np.intp)
    follows = np.flatnonzero(pairs[1:, 0] == pairs[:-1, 0])
    hinges = np.column_stack((pairs[follows], pairs[follows + 1, 1]))
    part_of = mesh.components[hinges[:, 0]]
    return [
        Linkage(
            int(part), np.unique(hinges[part_of == part, 1:]), piece_of, hinges[part_of == part]
        )
        for part in np.unique(part_of)
    ]


def _pieces(mesh: Mesh) -> NDArray[np.int32]:
    """Piece number of each element, block by block; elements that share a side are in one."""
    first = np.cumsum([0, *(block.element_count for block in mesh.blocks)])
    one, other = (first[facets[:, 0]] + facets[:, 1] for facets in mesh.shared_facets())
    return label_components(int(first[-1]), one, other)


def loose_joints(
    mesh: Mesh, linkage: Linkage, part: Part, nodes: NDArray, rows: Array
) -> list[str]:
    """A sentence if the pieces of a part can turn against each other.

    Parameters
    ----------
    nodes : (r,) int     the node of each support row on this part
    rows : (r, 3)        what the rows hold of the part's rigid motions
    """
    hinge = int(linkage.hinges[0, 0])
    where = f"node {hinge} at {at(mesh.nodes[hinge])}"
    count = len(linkage.pieces)
    if count > MOST_PIECES:
        return [f"hangs together at single nodes, such as {where}: {count} pieces; join them"]
    wide = np.concatenate(
        [*_support_rows(linkage, linkage.piece_of[nodes], rows), *_hinge_rows(mesh, linkage, part)]
    )
    if null_space(wide).shape[1] <= null_space(rows).shape[1]:
        return []
    return [f"can turn in itself: its pieces are joined only at single nodes, such as {where}"]


def _support_rows(linkage: Linkage, piece: NDArray, rows: Array) -> list[Array]:
    """Support rows in terms of all pieces; for each piece at most three that hold the same."""
    wide = []
    for number in np.unique(piece):
        triangle = np.linalg.qr(rows[piece == number], mode="r")
        wide.append(_in_piece(linkage, number, np.asarray(triangle)))
    return wide


def _hinge_rows(mesh: Mesh, linkage: Linkage, part: Part) -> list[Array]:
    """At each hinge two rows: what the pieces move in x and in y must be equal."""
    wide = []
    for node, one, other in linkage.hinges:
        rows = rigid_rows(mesh.nodes[[node, node]], np.eye(2), part)
        wide.append(_in_piece(linkage, one, rows) - _in_piece(linkage, other, rows))
    return wide


def _in_piece(linkage: Linkage, piece: int, rows: Array) -> Array:
    """Rows (r, 3) on one piece as rows on all pieces of the part, (r, 3 p)."""
    wide = np.zeros((len(rows), len(linkage.pieces), 3))
    wide[:, np.searchsorted(linkage.pieces, piece)] = rows
    return wide.reshape(len(rows), 3 * len(linkage.pieces))
