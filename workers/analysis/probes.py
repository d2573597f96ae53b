"""Stress and displacement at given points: which element holds a point, and where in it."""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import NamedTuple
from weakref import WeakKeyDictionary

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import coo_array, csr_array
from scipy.spatial import cKDTree

from elements.contract import ElementType
from workers.analysis.border import Border, border_of, nearest
from workers.analysis.field_mesh import FieldMesh
from workers.analysis.mesh import Mesh
from workers.analysis.request_places import BESIDE
from workers.errors import Fault, MeshError

Array = NDArray[np.float64]

CANDIDATES = 12  # nearest elements that are tried before a wider search
INSIDE = 1e-9  # in natural coordinates


@dataclass(frozen=True, eq=False)
class Located:
    """Points found in elements.

    block, element : (p,)    the lowest, where elements share the point
    natural : (p, 2)         natural coordinates
    position : (p, 2)        [L]; the points asked for, or those nearest on the border: a point on
        a true arc lies a little outside the chords of T3 and Q4
    """

    block: NDArray[np.int64]
    element: NDArray[np.int64]
    natural: Array
    position: Array


def locate(mesh: Mesh, points: Array, pointers: Sequence[str]) -> Located:
    """Find the elements that hold points (p, 2) [L].

    Raises
    ------
    MeshError   points outside the plate; the first for each pointer (points may share one).
    """
    search = _search(mesh)
    tree, owner = search.centres, search.owner
    found = Located(
        np.full(len(points), -1), np.full(len(points), -1),
        np.zeros((len(points), 2)), np.array(points, float),
    )  # fmt: skip
    if not len(points):
        return found
    _, near = tree.query(points, k=min(CANDIDATES, len(owner)))
    near = near.reshape(len(points), -1)
    _try(mesh, found, np.repeat(np.arange(len(points)), near.shape[1]), owner[near.ravel()])
    border = None
    for lost in np.flatnonzero(found.block < 0).tolist():
        boxed = _boxed(mesh, points[lost])
        _try(mesh, found, np.full(len(boxed), lost), boxed)
        if found.block[lost] < 0:
            border = border or border_of(mesh)
            _snap(mesh, border, found, lost)
    faults: dict[str, Fault] = {}
    for lost in np.flatnonzero(found.block < 0).tolist():
        faults.setdefault(pointers[lost], _outside(tree, points[lost], pointers[lost]))
    if faults:
        raise MeshError(faults.values())
    return found


def interpolation(field_mesh: FieldMesh, located: Located) -> csr_array:
    """(p, P) operator from values at the field points to values at the located points."""
    rows, columns, values = [], [], []
    for number, block in enumerate(field_mesh.mesh.blocks):
        here = np.flatnonzero(located.block == number)
        columns.append(field_mesh.connectivity[number][located.element[here]].ravel())
        values.append(block.element.shape_functions(located.natural[here]).ravel())
        rows.append(np.repeat(here, block.element.node_count))
    entries = np.concatenate(values), (np.concatenate(rows), np.concatenate(columns))
    return coo_array(entries, shape=(len(located.block), field_mesh.point_count)).tocsr()


class _Search(NamedTuple):
    """What is looked up for every point.

    centres : of all elements; owner (M, 2): block and element of each
    low, high : for each block (m, 2), the upright boxes of its elements, a little enlarged
    """

    centres: cKDTree
    owner: NDArray[np.int64]
    low: tuple[Array, ...]
    high: tuple[Array, ...]

    def may_hold(self, block: int, elements: NDArray | slice, points: Array) -> NDArray[np.bool_]:
        """Whether points lie in the boxes of elements, one by one."""
        low, high = self.low[block][elements], self.high[block][elements]
        return np.asarray(((low <= points) & (points <= high)).all(axis=1))


_SEARCHES: WeakKeyDictionary[Mesh, _Search] = WeakKeyDictionary()


def _search(mesh: Mesh) -> _Search:
    """Made once for a mesh."""
    if mesh in _SEARCHES:
        return _SEARCHES[mesh]
    centres, owners, lows, highs = [], [], [], []
    for number, block in enumerate(mesh.blocks):
        coords = mesh.coords(number)
        centres.append(coords[:, : block.element.corners].mean(axis=1))
        count = block.element_count
        owners.append(np.column_stack((np.full(count, number), np.arange(count))))
        low, high = coords.min(axis=1), coords.max(axis=1)
        margin = 0.2 * (high - low).max(axis=1, keepdims=True)  # for sides that bulge
        lows.append(low - margin)
        highs.append(high + margin)
    tree = cKDTree(np.concatenate(centres))
    found = _Search(tree, np.concatenate(owners), tuple(lows), tuple(highs))
    return _SEARCHES.setdefault(mesh, found)


def _boxed(mesh: Mesh, point: Array) -> NDArray[np.int64]:
    """(block, element) of all elements whose box holds a point."""
    found = []
    for number in range(len(mesh.blocks)):
        elements = np.flatnonzero(_search(mesh).may_hold(number, slice(None), point))
        found.append(np.column_stack((np.full(len(elements), number), elements)))
    return np.concatenate(found)


def _try(mesh: Mesh, found: Located, point: NDArray, owner: NDArray[np.int64]) -> None:
    """Enter in `found` the lowest of the candidates (c,) that holds each point."""
    for number, element, mine, natural in _mapped(mesh, found.position[point], owner):
        hit = element.inside(natural, INSIDE)
        rows = point[mine[hit]]
        # Candidates come in descending order, and of repeated rows the last entry stays.
        found.block[rows], found.element[rows] = number, owner[mine[hit], 1]
        found.natural[rows] = natural[hit]


def _snap(mesh: Mesh, border: Border, found: Located, lost: int) -> None:
    """Enter the nearest point of the border, if it is near enough (`BESIDE`)."""
    point = found.position[lost]
    chord, foot = nearest(border, point)
    length = np.linalg.norm(border.end[chord] - border.start[chord])
    if np.linalg.norm(foot - point) > BESIDE * length:
        return
    number, chosen, _ = mesh.boundary[border.row[chord]]
    block = mesh.blocks[number]
    coords = mesh.nodes[block.connectivity[[chosen]]]
    natural, converged = block.element.natural_coordinates(coords, foot[None])
    if converged[0]:
        natural = _clamp(natural, triangle=block.element.is_triangle)
        found.block[lost], found.element[lost], found.natural[lost] = number, chosen, natural[0]
        found.position[lost] = block.element.shape_functions(natural)[0] @ coords[0]


def _mapped(
    mesh: Mesh, points: Array, owner: NDArray[np.int64]
) -> Iterator[tuple[int, ElementType, NDArray[np.intp], Array]]:
    """Natural coordinates of points (c, 2) in candidates (c, 2), block by block.

    Yields block, element type, rows of the candidates that have a solution, and the coordinates;
    blocks and elements in descending order.
    """
    for number in reversed(range(len(mesh.blocks))):
        block = mesh.blocks[number]
        mine = np.flatnonzero(owner[:, 0] == number)
        mine = mine[np.argsort(-owner[mine, 1], kind="stable")]
        # Newton's iteration costs far more than a look at the boxes.
        mine = mine[_search(mesh).may_hold(number, owner[mine, 1], points[mine])]
        coords = mesh.nodes[block.connectivity[owner[mine, 1]]]
        natural, converged = block.element.natural_coordinates(coords, points[mine])
        yield number, block.element, mine[converged], natural[converged]


def _clamp(natural: Array, *, triangle: bool) -> Array:
    """The natural points (m, 2) drawn back into the reference shape."""
    if not triangle:
        return np.clip(natural, -1.0, 1.0)
    r, s = natural.T
    barycentric = np.maximum(np.column_stack((1 - r - s, r, s)), 0.0)
    return (barycentric / barycentric.sum(axis=1, keepdims=True))[:, 1:]


def _outside(tree: cKDTree, point: Array, pointer: str) -> Fault:
    near = tree.data[tree.query(point)[1]]
    message = (
        f"({point[0]:g}, {point[1]:g}) is outside the plate; the nearest element has its centre "
        f"at ({near[0]:g}, {near[1]:g})"
    )
    return Fault(pointer, message)
