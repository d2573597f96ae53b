"""The border of a mesh as straight chords: what is inside, what lies near."""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from workers.analysis.mesh import Mesh

Array = NDArray[np.float64]
Numbers = NDArray[np.intp]

PIECES = 4  # chords for a curved facet: they leave its curve by a sixteenth of its rise
STRAIGHT = 1e-9  # rise over length below which one chord is enough


class Border(NamedTuple):
    """The boundary as s chords, the material on their left.

    row : (s,) place of the facet in `mesh.boundary`
    start, end : (s, 2) positions of the ends [L]
    first, last : (s,) numbers of the ends: nodes, or beyond them the joints of a curved facet
    """

    row: Numbers
    start: Array
    end: Array
    first: Numbers
    last: Numbers


def border_of(mesh: Mesh) -> Border:
    """Chords of the boundary facets: one for a straight facet, PIECES for a curved one."""
    table = mesh.facet_table(mesh.boundary).astype(np.intp)
    a, b = mesh.nodes[table[:, 0]], mesh.nodes[table[:, 1]]
    rise = np.where(table[:, 2:] < 0, 0, mesh.nodes[table[:, 2]] - (a + b) / 2)
    curved = np.linalg.norm(rise, axis=1) > STRAIGHT * np.linalg.norm(b - a, axis=1)
    straight, bent = np.flatnonzero(~curved), np.flatnonzero(curved)
    t = np.arange(PIECES + 1)[:, None] / PIECES
    points = (1 - t) * a[bent, None] + t * b[bent, None] + 4 * t * (1 - t) * rise[bent, None]
    joints = mesh.node_count + np.arange(len(bent) * (PIECES + 1)).reshape(-1, PIECES + 1)
    joints[:, 0], joints[:, -1] = table[bent, 0], table[bent, 1]
    return Border(
        np.concatenate((straight, np.repeat(bent, PIECES))),
        np.concatenate((a[straight], points[:, :-1].reshape(-1, 2))),
        np.concatenate((b[straight], points[:, 1:].reshape(-1, 2))),
        np.concatenate((table[straight, 0], joints[:, :-1].ravel())),
        np.concatenate((table[straight, 1], joints[:, 1:].ravel())),
    )


def windings(border: Border, point: Array, besides: int | None = None) -> int:
    """How often the border goes round a point (2,): 1 in the plate, 0 outside and in holes.

    Counted on the ray upwards: chords to the left count one, chords to the right minus one.
    `besides` leaves out a chord that the point lies on; the answer is that just above it.
    """
    x, y = point
    left, right = border.start[:, 0] <= x, border.end[:, 0] <= x
    hit = np.flatnonzero(left != right)
    hit = hit[hit != besides] if besides is not None else hit
    a, b = border.start[hit], border.end[hit]
    above = a[:, 1] + (x - a[:, 0]) * (b[:, 1] - a[:, 1]) / (b[:, 0] - a[:, 0]) > y
    return int(np.where(right[hit], 1, -1)[above].sum())


def nearest(border: Border, point: Array) -> tuple[int, Array]:
    """The chord nearest to a point (2,), and the place on it that is nearest."""
    along = border.end - border.start
    t = ((point - border.start) * along).sum(axis=1) / (along**2).sum(axis=1)
    feet = border.start + np.clip(t, 0, 1)[:, None] * along
    chord = int(((feet - point) ** 2).sum(axis=1).argmin())
    return chord, feet[chord]
