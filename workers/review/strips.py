"""The strips of a plate that compression could buckle: how wide, how long, held at which edges.

A strip runs along the compression through a place and reaches across it from border to border.
What holds its edges against moving out of the plane no plane model knows, so it is assumed:

- an edge where the plate is supported in its plane by more than a roller is simply supported;
- a roller on the side's own normal is a plane of symmetry, and the strip goes on behind it;
- every other edge is free; the two ends are simply supported.
"""

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from workers.analysis.border import Border, border_of
from workers.analysis.held import held_by
from workers.analysis.mesh import Mesh
from workers.analysis.selection import Finder
from workers.job import Job

Array = NDArray[np.float64]

FREE, MIRROR, HELD = 0, 1, 2  # what an edge does out of the plane
BESIDE = 1e-9  # of a ray's length: hits behind its start are no hits
ALONG_NORMAL = 0.99  # cosine between a roller's direction and the side's normal


class Edges(NamedTuple):
    """The border as chords, and for each what holds it out of the plane."""

    border: Border
    kind: NDArray[np.int8]


class Strip(NamedTuple):
    """A strip along the compression.

    sides : (2,) distances from its place to its long edges, as the model has them [L]
    width, length : of the whole strip, what is behind a plane of symmetry included [L]; the width
        is infinite where both edges are such planes
    held : how many of its long edges are simply supported
    mirrored : whether a plane of symmetry was taken to be one
    """

    sides: tuple[float, float]
    width: float
    length: float
    held: int
    mirrored: bool


def find_edges(job: Job, mesh: Mesh) -> Edges:
    """What each chord of the border is taken to be."""
    border = border_of(mesh)
    rows = held_by(job, Finder(mesh)).rows
    kinds = np.full(len(mesh.boundary), FREE, np.int8)
    table = mesh.facet_table(mesh.boundary)
    ends = mesh.nodes[table[:, :2]]
    tangent = ends[:, 1] - ends[:, 0]
    normal = (
        np.column_stack((tangent[:, 1], -tangent[:, 0])) / np.linalg.norm(tangent, axis=1)[:, None]
    )
    directions: dict[int, list[tuple[Array, float]]] = {}
    for node, direction, value in zip(rows.node.tolist(), rows.direction, rows.value, strict=True):
        directions.setdefault(node, []).append((direction, value))
    for facet, nodes in enumerate(table.tolist()):
        of_nodes = [directions.get(node) for node in nodes if node >= 0]
        if any(held is None for held in of_nodes):
            continue
        # The middle of a facet is not at a corner, where another side's support would count.
        inner = [held for held in of_nodes if held is not None and _is_roller(held, normal[facet])]
        kinds[facet] = MIRROR if inner else HELD
    return Edges(border, kinds[border.row])


def _is_roller(held: list[tuple[Array, float]], normal: Array) -> bool:
    """Whether a node is held at zero along the side's normal, and in no other way."""
    return all(abs(d @ normal) > ALONG_NORMAL and value == 0 for d, value in held)


def strips_through(edges: Edges, places: Array, directions: Array) -> list[Strip | None]:
    """The strip along each direction (p, 2) through each place (p, 2); None in a crevice."""
    across = np.column_stack((-directions[:, 1], directions[:, 0]))
    hits = [_hits(edges, places, ray) for ray in (across, -across, directions, -directions)]
    distance, kind = (np.array(part).T.tolist() for part in zip(*hits, strict=True))
    return [_strip(*both) for both in zip(distance, kind, strict=True)]


def _strip(distance: list[float], kind: list[int]) -> Strip | None:
    """From the distances to the edges at the left, right, ahead and behind, and their kinds."""
    if not np.isfinite(distance).all():
        return None
    left, right, ahead, behind = distance
    kinds = kind[0], kind[1]
    width, length = left + right, ahead + behind
    held = kinds.count(HELD)
    if MIRROR in kinds:
        width, held = 2 * width, 2 * held
        if kinds == (MIRROR, MIRROR):
            width = np.inf
    end_mirrored = MIRROR in kind[2:]
    return Strip(
        sides=(left, right),
        width=width,
        length=2 * length if end_mirrored else length,
        held=held,
        mirrored=end_mirrored or MIRROR in kinds,
    )


def _hits(edges: Edges, places: Array, directions: Array) -> tuple[Array, NDArray[np.int64]]:
    """Distance to the border along a ray from each place, inf if none, and the kind of edge."""
    border, count = edges.border, len(places)
    distance, kind = np.full(count, np.inf), np.zeros(count, np.int64)
    turned = np.stack((directions[:, 1], -directions[:, 0]), axis=1)
    from_ray = np.einsum("pi,pi->p", places, turned)[:, None]
    before = turned @ border.start.T - from_ray
    after = turned @ border.end.T - from_ray
    ray, facet = np.nonzero((before > 0) != (after > 0))
    if not len(ray):
        return distance, kind
    one, other = before[ray, facet], after[ray, facet]
    part = (one / (one - other))[:, None]
    points = (1 - part) * border.start[facet] + part * border.end[facet] - places[ray]
    along = np.einsum("ci,ci->c", points, directions[ray])
    reach = np.zeros(count)
    np.maximum.at(reach, ray, np.abs(along))
    ahead = np.flatnonzero(along > BESIDE * reach[ray])
    # The farthest first: of repeated rays the last entry, the nearest, stays.
    ahead = ahead[np.argsort(-along[ahead], kind="stable")]
    distance[ray[ahead]], kind[ray[ahead]] = along[ahead], edges.kind[facet[ahead]]
    return distance, kind


def coefficient(strip: Strip) -> tuple[float, float]:
    """Buckling coefficient k and the length b that goes with it [L].

    The critical stress is k pi^2 E / (12 (1 - nu^2)) (t / b)^2.

    - both edges simply supported: k = 4, for short strips (b/L + L/b)^2; b is the width;
    - one supported, one free: k = 0.43 + (b/L)^2; b is the width;
    - both free: a strut with pinned ends, k = 1; b is its length.

    References
    ----------
    Timoshenko & Gere, *Theory of Elastic Stability*, 2nd edition, ch. 9 (from memory).
    """
    b, L = strip.width, strip.length
    if strip.held >= 2:
        return (4.0 if b <= L else (b / L + L / b) ** 2), b
    if strip.held == 1:
        return 0.43 + (b / L) ** 2, b
    return 1.0, L
