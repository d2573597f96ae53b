"""Quadrilaterals from pairs of triangles: fast and sound where the library's own are not.

The library fits quadrilaterals to the boundary in rows, which is best, but takes a time that grows
with the square of the boundary's pieces, and leaves poor ones in tight places.
"""

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from workers.analysis.meshing.flat_mesh import FlatMesh, cell_edges, side_keys
from workers.analysis.meshing.smooth import quadrilateral_quality, qualities, triangle_quality

Array = NDArray[np.float64]
Index = NDArray[np.intp]

LEAST = 0.3  # scaled Jacobian of a pair that is worth making
POOR = 0.3  # scaled Jacobian below which two triangles may do better
WIDE = np.cos(np.radians(130))  # cosine of a corner that two border sides may make


def pair_triangles(mesh: FlatMesh) -> FlatMesh:
    """Merge triangles in pairs, the best first; those left without a partner stay triangles."""
    one, other, corners = _candidates(mesh)
    quality = quadrilateral_quality(mesh.nodes[corners])
    sound = (quality > LEAST) & ~_wide_corners(mesh, corners).any(axis=1)
    one, other, corners, quality = one[sound], other[sound], corners[sound], quality[sound]
    chosen = _matched(one, other, quality, len(mesh.triangles))
    free = np.ones(len(mesh.triangles), bool)
    free[one[chosen]] = free[other[chosen]] = False
    domain = mesh.triangle_domain
    return replace(
        mesh,
        triangles=mesh.triangles[free],
        triangle_domain=domain[free],
        quadrilaterals=np.concatenate((mesh.quadrilaterals, corners[chosen])).astype(np.int32),
        quadrilateral_domain=np.concatenate((mesh.quadrilateral_domain, domain[one[chosen]])),
    )


def _candidates(mesh: FlatMesh) -> tuple[Index, Index, NDArray[np.int64]]:
    """Triangles that share a side which is no border, and the quadrilateral they make."""
    sides = cell_edges(mesh.triangles).reshape(-1, 2)
    keys = side_keys(sides)
    order = np.argsort(keys, kind="stable")
    same = np.flatnonzero(keys[order][1:] == keys[order][:-1])
    first, second = order[same], order[same + 1]
    border = np.isin(keys[first], side_keys(mesh.segments.astype(np.int64)))
    first, second = first[~border], second[~border]
    (one, i), (other, j) = np.divmod(first, 3), np.divmod(second, 3)
    tips = mesh.triangles[one, (i + 2) % 3], mesh.triangles[other, (j + 2) % 3]
    corners = np.stack((tips[0], sides[first, 0], tips[1], sides[first, 1]), axis=1)
    return one, other, corners.astype(np.int64)


def _matched(one: Index, other: Index, quality: Array, count: int) -> Index:
    """Pairs of which no two have a triangle in common; each the best for both its triangles.

    A triangle with one possible partner left comes before all others.
    """
    # Equal qualities are common; the draw breaks ties, the same way every time.
    value = quality + 1e-9 * np.random.default_rng(0).permutation(len(quality)) / len(quality)
    free, chosen = np.ones(count, bool), [np.empty(0, np.intp)]
    open_ = np.arange(len(quality))
    while len(open_):
        a, b = one[open_], other[open_]
        partners = np.bincount(a, minlength=count) + np.bincount(b, minlength=count)
        worth = value[open_] + (partners[a] == 1) + (partners[b] == 1)
        best = np.zeros(count)
        np.maximum.at(best, a, worth)
        np.maximum.at(best, b, worth)
        taken = (worth == best[a]) & (worth == best[b])
        chosen.append(open_[taken])
        free[a[taken]] = free[b[taken]] = False
        open_ = open_[free[a] & free[b]]
    return np.concatenate(chosen)


def split_wide(mesh: FlatMesh) -> FlatMesh:
    """Quadrilaterals with a wide corner between two border sides become two triangles.

    On a smooth border such a corner is nearly straight, and stays so however often it is split.
    """
    quads = mesh.quadrilaterals.astype(np.int64)
    wide = _wide_corners(mesh, quads)
    rows = np.flatnonzero(wide.any(axis=1))
    if not len(rows):
        return mesh
    turned = (wide[rows].argmax(axis=1)[:, None] + np.arange(4)) % 4
    a, b, c, d = np.take_along_axis(quads[rows], turned, axis=1).T
    new = np.concatenate((np.stack((a, b, c), axis=1), np.stack((a, c, d), axis=1)))
    keep = np.ones(len(quads), bool)
    keep[rows] = False
    domain = np.tile(mesh.quadrilateral_domain[rows], 2)
    return replace(
        mesh,
        triangles=np.concatenate((mesh.triangles, new.astype(np.int32))),
        triangle_domain=np.concatenate((mesh.triangle_domain, domain)),
        quadrilaterals=mesh.quadrilaterals[keep],
        quadrilateral_domain=mesh.quadrilateral_domain[keep],
    )


def split_poor(mesh: FlatMesh) -> FlatMesh:
    """Poor quadrilaterals become two triangles where those are better."""
    quality = qualities(mesh)[1]
    poor = np.flatnonzero(quality < POOR)
    if not len(poor):
        return mesh
    a, b, c, d = mesh.quadrilaterals[poor].T
    ways = np.stack(
        [
            np.stack((np.stack((a, b, c), axis=1), np.stack((a, c, d), axis=1)), axis=1),
            np.stack((np.stack((a, b, d), axis=1), np.stack((b, c, d), axis=1)), axis=1),
        ]
    )
    worst = triangle_quality(mesh.nodes[ways]).min(axis=2)
    way = worst.argmax(axis=0)
    better = worst.max(axis=0) > quality[poor]
    chosen = ways[way, np.arange(len(poor))][better]
    keep = np.ones(len(mesh.quadrilaterals), bool)
    keep[poor[better]] = False
    domain = np.repeat(mesh.quadrilateral_domain[poor[better]], 2)
    return replace(
        mesh,
        triangles=np.concatenate((mesh.triangles, chosen.reshape(-1, 3))),
        triangle_domain=np.concatenate((mesh.triangle_domain, domain)),
        quadrilaterals=mesh.quadrilaterals[keep],
        quadrilateral_domain=mesh.quadrilateral_domain[keep],
    )


def _wide_corners(mesh: FlatMesh, quads: NDArray[np.int64]) -> NDArray[np.bool_]:
    """Which corners of quadrilaterals are wide and between two border sides, (m, 4)."""
    border = np.isin(side_keys(cell_edges(quads)), side_keys(mesh.segments.astype(np.int64)))
    corners = mesh.nodes[quads]
    ahead = np.roll(corners, -1, axis=1) - corners
    back = np.roll(corners, 1, axis=1) - corners
    lengths = np.linalg.norm(ahead, axis=2) * np.linalg.norm(back, axis=2)
    cosine = (ahead * back).sum(axis=2) / lengths
    return border & np.roll(border, 1, axis=1) & (cosine < WIDE)
