"""Superconvergent patch recovery as one sparse operator, built once for each mesh.

A row gives the recovered stress at a field point as a weighted sum of the stress at sample points
around it. The weights depend on positions alone, so all components and all load cases share them.
Sampling the stress is the business of `recovery.py`.

Each corner point has a patch: the elements of its region that touch it. A polynomial is fitted to
the samples of the patch by least squares and evaluated at the corner; at a mid-side point the fits
of both its corners are averaged. Samples are the superconvergent points of the elements. A patch
on a border takes a ring of neighbours more, and as anchors the stress that its own elements give
at the corner itself: less accurate, but between samples and anchors the fit is interpolated and
not extrapolated. (Not from Q4, whose corners carry the parasitic shear of bending.) A patch with
too few or badly placed samples grows by rings; what no ring can cure (a lone element) drops terms
of the polynomial, down to the mean of the samples.

References
----------
Zienkiewicz & Zhu, "The superconvergent patch recovery and a posteriori error estimates. Part 1:
The recovery technique", Int. J. Numer. Meth. Engng 33 (1992). Own here, by trial on Kirsch's plate
and an elliptic membrane: the weights, the growth of border patches and their anchors.
"""

from collections.abc import Iterator
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import coo_array, csc_array, csr_array, diags_array

from workers.analysis.field_mesh import FieldMesh

Array = NDArray[np.float64]
Numbers = NDArray[np.int64]

# Polynomials are heads of this list of powers of (x, y); x is the long direction of the patch.
POWERS = ((0, 0), (1, 0), (0, 1), (2, 0), (1, 1), (0, 2))
TERMS = {1: (3, 2, 1), 2: (6, 5, 3, 2, 1)}  # by element order: the full polynomial, then fewer
LEAST_SAMPLES = {6: 9, 5: 7, 3: 4, 2: 3, 1: 1}  # more than terms, so that a fit smooths
RINGS = 2  # how far a patch grows before it drops terms

# A sample counts with distance^-power, an anchor as half of the nearest sample. On borders strong
# weights keep the fit local; inside they change little, and a low power keeps the
# superconvergence. Without anchors the peak of an elliptic membrane was 3 % (T6) and 1.6 % (Q8) too
# high on 8 x 8 elements and that at a hole 20 % too high with T3; with them 0.2 and 0.6 % too low,
# and 10 % too high. With anchors from Q4 the shear stress of a cantilever six elements deep was
# wrong by 5 % of the bending stress, without them by 0.8 %.
INNER_POWER = 1
BORDER_POWER = {1: 2, 2: 3}  # by element order
ANCHOR = 0.5

# A fit is refused when a unit scatter of the samples would scatter its value at the corner by
# more than MOST_NOISE (an inner patch has 0.3 to 0.6, a border patch 0.8 to 2), or when its
# normal equations are this near singular (sound patches: 1e-4 and more).
MOST_NOISE = 2.0
LEAST_RECIPROCAL_CONDITION = 1e-5

BATCH = 4096  # patches fitted at once: bounds the memory to some tens of MB


def sample_positions(field_mesh: FieldMesh, block: int) -> Array:
    """Superconvergent points of the elements of a block, (m, r, 2) [L]."""
    element = field_mesh.mesh.blocks[block].element
    return np.matmul(
        element.shape_functions(element.recovery_points()), field_mesh.mesh.coords(block)
    )


def border_corners(field_mesh: FieldMesh, block: int) -> list[NDArray[np.intp]]:
    """Elements of a block that have a border point as corner 0, corner 1, ...: the anchors."""
    element = field_mesh.mesh.blocks[block].element
    if element.order == 1 and not element.is_triangle:
        return []
    on_border = field_mesh.on_border[field_mesh.connectivity[block][:, : element.corners]]
    return [np.flatnonzero(at_corner) for at_corner in on_border.T]


def recovery_operator(field_mesh: FieldMesh) -> csr_array:
    """The (P, Q) operator from samples to field points.

    The samples: block by block, element by element, in the order of `ElementType.recovery_points`;
    then the anchors, block by block, corner by corner, in the order of `border_corners`. A stress
    field that is linear (T3, Q4) or quadratic (T6, Q8) is reproduced exactly wherever the patches
    have enough samples; a constant one always.
    """
    elements = _Elements.number(field_mesh)
    anchors = _anchors(field_mesh)
    targets = _targets(field_mesh)
    corners = np.flatnonzero(np.diff(elements.at_point.indptr))
    members = elements.at_point[corners]
    order = np.minimum.reduceat(elements.order[members.indices], members.indptr[:-1])
    own = _first_patches(elements.at_point, field_mesh.on_border)
    position = np.concatenate((elements.position, field_mesh.points[anchors.point]))
    entries = []
    for step in range(len(TERMS[2])):
        for ring in range(RINGS + 1):
            if not len(corners):
                break
            terms = np.array([TERMS[o][min(step, len(TERMS[o]) - 1)] for o in (1, 2)])[order - 1]
            members = _grow(own[corners], elements.at_point, ring)
            patches = _Patches(corners, order, terms, members)
            fitted = np.zeros(len(corners), bool)
            for rows, samples in _alike(patches, elements, anchors):
                fit = _fit(field_mesh, patches, rows, position[samples])
                fitted[rows] = fit.sound
                entries.append(_entries(field_mesh, targets, corners[rows], fit, samples))
            corners, order = corners[~fitted], order[~fitted]
    row, column, value = (np.concatenate(part) for part in zip(*entries, strict=True))
    shape = (field_mesh.point_count, len(position))
    return coo_array((value, (row, column)), shape=shape).tocsr()


@dataclass(frozen=True, eq=False)
class _Elements:
    """The elements of all blocks in one numbering.

    at_point : (P, M) 0/1 matrix   which elements have which points as corners
    position : (Q, 2)              of the samples, element after element [L]
    first, count : (M,)            the samples of each element
    order : (M,)                   polynomial order of the element
    """

    at_point: csr_array
    position: Array
    first: Numbers
    count: Numbers
    order: Numbers

    @classmethod
    def number(cls, field_mesh: FieldMesh) -> "_Elements":
        blocks = field_mesh.mesh.blocks
        position = [sample_positions(field_mesh, b) for b in range(len(blocks))]
        sizes = [block.element_count for block in blocks]
        count = np.repeat([xy.shape[1] for xy in position], sizes)
        corners = [
            points[:, : block.element.corners]
            for block, points in zip(blocks, field_mesh.connectivity, strict=True)
        ]
        row = np.concatenate([c.ravel() for c in corners])
        column = np.repeat(np.arange(sum(sizes)), np.repeat([c.shape[1] for c in corners], sizes))
        at_point = coo_array(
            (np.ones(len(row), np.int32), (row, column)),
            shape=(field_mesh.point_count, sum(sizes)),
        ).tocsr()
        order = np.repeat([block.element.order for block in blocks], sizes)
        flat = np.concatenate([xy.reshape(-1, 2) for xy in position])
        return cls(at_point, flat, np.cumsum(count) - count, count, order)


class _Anchors(NamedTuple):
    """point (a,) : field point of each anchor; at_point (P, a) : which anchors a point has."""

    point: Numbers
    at_point: csr_array


class _Patches(NamedTuple):
    """Patches about corner points: element order and number of terms, and (p, M) membership."""

    corner: Numbers
    order: Numbers
    terms: Numbers
    members: csr_array


class _Fit(NamedTuple):
    """Fits of g patches with n samples and p terms.

    centre (g, 2) and frame (g, 2, 2): local coordinates are (xy - centre) @ frame;
    coefficient (g, p, n): of the polynomial, for a unit value at each sample;
    sound (g,): whether the fit may be used.
    """

    centre: Array
    frame: Array
    coefficient: Array
    sound: NDArray[np.bool_]


def _anchors(field_mesh: FieldMesh) -> _Anchors:
    points = [np.empty(0, np.int64)]
    for number, connectivity in enumerate(field_mesh.connectivity):
        for corner, elements in enumerate(border_corners(field_mesh, number)):
            points.append(connectivity[elements, corner].astype(np.int64))
    point = np.concatenate(points)
    at_point = coo_array(
        (np.ones(len(point), np.int32), (point, np.arange(len(point)))),
        shape=(field_mesh.point_count, len(point)),
    )
    return _Anchors(point, at_point.tocsr())


def _targets(field_mesh: FieldMesh) -> csc_array:
    """(P, P): with what share the fit of corner j enters the value at point i."""
    pairs, shares = [], []
    for block, points in zip(field_mesh.mesh.blocks, field_mesh.connectivity, strict=True):
        corners = points[:, : block.element.corners].ravel()
        pairs.append(np.column_stack((corners, corners)))
        shares.append(np.ones(len(corners)))
        for side in block.element.sides:
            if len(side) == 3:
                ends, middle = points[:, list(side[:2])], points[:, [side[2]]]
                pairs.append(np.column_stack((np.repeat(middle, 2), ends.ravel())))
                shares.append(np.full(ends.size, 0.5))
    row, column = np.concatenate(pairs).astype(np.int64).T
    size = field_mesh.point_count
    _, once = np.unique(column * size + row, return_index=True)
    share = np.concatenate(shares)[once]
    return coo_array((share, (row[once], column[once])), shape=(size, size)).tocsc()


def _first_patches(at_point: csr_array, on_border: NDArray[np.bool_]) -> csr_array:
    """(P, M): the elements at each corner; at a border corner their neighbours as well.

    Border corners have elements on one side only. What those alone support is a poor fit even
    where it has full rank: with T3 it doubled the error of the recovered stress.
    """
    border = diags_array(on_border.astype(np.int32), dtype=np.int32)
    return (at_point + _grow(border @ at_point, at_point, 1)).tocsr()


def _grow(members: csr_array, at_point: csr_array, rings: int) -> csr_array:
    """Patches (p, M), larger by rings of neighbours."""
    for _ in range(rings):
        members = ((members @ at_point.T) @ at_point).tocsr()
    return members


def _alike(
    patches: _Patches, elements: _Elements, anchors: _Anchors
) -> Iterator[tuple[Numbers, Numbers]]:
    """Batches of patches with equal numbers of samples, anchors and terms, and of equal order.

    Yields the rows (g,) of `patches` and the numbers (g, n) of their samples, anchors last;
    patches with too few samples are left out.
    """
    members = patches.members
    owned = np.diff(members.indptr)
    samples = np.add.reduceat(elements.count[members.indices], members.indptr[:-1])
    anchored = np.diff(anchors.at_point.indptr)[patches.corner]
    kinds, kind = np.unique(
        np.column_stack((samples, anchored, patches.terms, patches.order)),
        axis=0,
        return_inverse=True,
    )
    for number, (count, held, terms, _) in enumerate(kinds):
        if count < LEAST_SAMPLES[int(terms)]:
            continue
        alike = np.flatnonzero(kind.ravel() == number)
        for start in range(0, len(alike), BATCH):
            rows = alike[start : start + BATCH]
            inside = members.indices[_ranges(members.indptr[rows], owned[rows])]
            found = _ranges(elements.first[inside], elements.count[inside])
            first = anchors.at_point.indptr[patches.corner[rows]]
            held_by = anchors.at_point.indices[_ranges(first, anchored[rows])]
            yield (
                rows,
                np.column_stack(
                    (
                        found.reshape(len(rows), count),
                        len(elements.position) + held_by.reshape(len(rows), held),
                    )
                ),
            )


def _fit(field_mesh: FieldMesh, patches: _Patches, rows: Numbers, position: Array) -> _Fit:
    """Weighted least squares in each of g patches of one kind; position (g, n, 2) [L]."""
    corner, order, terms = patches.corner[rows], patches.order[rows[0]], patches.terms[rows[0]]
    centre = field_mesh.points[corner]
    offset = position - centre[:, None]
    distance = np.linalg.norm(offset, axis=2)
    power = np.where(field_mesh.on_border[corner], BORDER_POWER[int(order)], INNER_POWER).astype(
        float
    )
    away = distance > 0  # anchors lie on the corner itself
    nearest = distance.min(axis=1, keepdims=True, where=away, initial=np.inf)
    relative = np.divide(distance, nearest, out=np.ones_like(distance), where=away)
    weight = np.where(away, relative ** -power[:, None], ANCHOR)
    frame = _principal_axes(position) / distance.max(axis=1)[:, None, None]
    A = _polynomial(np.matmul(offset, frame), int(terms))
    weighted = (A * weight[..., None]).transpose(0, 2, 1)
    normal = np.matmul(weighted, A)
    # So that one singular patch does not stop the batch; far below what a sound fit can feel.
    normal += 1e-14 * np.trace(normal, axis1=1, axis2=2)[:, None, None] * np.eye(terms)
    inverse = np.linalg.inv(normal)
    coefficient = np.matmul(inverse, weighted)
    noise = np.linalg.norm(coefficient[:, 0], axis=1)
    condition = np.linalg.norm(normal, axis=(1, 2)) * np.linalg.norm(inverse, axis=(1, 2))
    sound = (noise <= MOST_NOISE) & (condition * LEAST_RECIPROCAL_CONDITION <= 1)
    return _Fit(centre, frame, coefficient, sound)


def _principal_axes(position: Array) -> Array:
    """Rotations (g, 2, 2) that turn the long direction of each cloud of points into x."""
    spread = position - position.mean(axis=1, keepdims=True)
    xx, yy, xy = (
        (spread[..., i] * spread[..., j]).sum(axis=1) for i, j in ((0, 0), (1, 1), (0, 1))
    )
    angle = np.arctan2(2 * xy, xx - yy) / 2
    cos, sin = np.cos(angle), np.sin(angle)
    return np.stack((np.stack((cos, -sin), axis=-1), np.stack((sin, cos), axis=-1)), axis=1)


def _polynomial(xy: Array, terms: int) -> Array:
    """The first terms of the polynomial at local points, (..., 2) -> (..., terms)."""
    x, y = xy[..., 0], xy[..., 1]
    return np.stack([x**i * y**j for i, j in POWERS[:terms]], axis=-1)


def _entries(
    field_mesh: FieldMesh, targets: csc_array, corners: Numbers, fit: _Fit, samples: Numbers
) -> tuple[Numbers, Numbers, Array]:
    """Rows, columns and values of the operator that the sound fits of a batch contribute."""
    sound = np.flatnonzero(fit.sound)
    first = targets.indptr[corners[sound]]
    count = targets.indptr[corners[sound] + 1] - first
    at = _ranges(first, count)
    patch, target = np.repeat(sound, count), targets.indices[at]
    offset = field_mesh.points[target] - fit.centre[patch]
    local = np.matmul(offset[:, None], fit.frame[patch])[:, 0]
    share = _polynomial(local, fit.coefficient.shape[1]) * targets.data[at][:, None]
    value = np.matmul(share[:, None], fit.coefficient[patch])[:, 0]
    row = np.repeat(target, samples.shape[1])
    return row, samples[patch].ravel(), value.ravel()


def _ranges(first: Numbers, count: Numbers) -> Numbers:
    """The ranges first[i] .. first[i] + count[i], one after another."""
    end = np.cumsum(count)
    return np.arange(count.sum()) + np.repeat(first - end + count, count)
