"""Supports: which displacements they hold, at what value, and the springs they add.

Every support becomes rows "displacement of a node along a unit direction = value". At each node
the rows, in the job's order, leave it free, held along one direction (its dofs are then turned into
that direction) or held altogether. The matrix keeps its pattern: held dofs are decoupled in place,
prescribed values go to the right-hand side (`solution.py`).
"""

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import coo_array, csr_array

from workers.analysis.held import held_by
from workers.analysis.mesh import Mesh
from workers.analysis.selection import Finder
from workers.analysis.springs import SpringBlocks
from workers.analysis.support_rows import ALL, Rows
from workers.errors import Fault, MeshError
from workers.job import Job

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]

PARALLEL = 1e-6  # rad; directions closer than this are one direction
CONSISTENT = 1e-9  # relative difference of prescribed values that is rounding


@dataclass(frozen=True, eq=False)
class Share:
    """The part of the reactions that one support takes: at nodes[i], (R . measure_i) direction_i.

    nodes (k,); direction (k, 2) the support pushes along; measure (k, 2) dual to the directions
    at the node, so that the shares of all supports add up to the reaction R.
    """

    nodes: NDArray[np.int64]
    direction: Array
    measure: Array


@dataclass(frozen=True, eq=False)
class Supports:
    """All supports of a job, on the nodes of a mesh.

    held : (N, 2) bool        dofs that are held, in the node's own axes
    turned : (t,) int         nodes whose own axes are not x and y
    axes : (t, 2, 2)          their axes: column 0 is the held direction, column 1 the free one
    prescribed : (2N, c) csr  displacement of the held part, global axes, by case [L]
    springs : one for each support
    shares : one for each support
    directions : (r,) nodes and (r, 2) directions in which a support or a spring resists
    """

    held: Mask
    turned: NDArray[np.int64]
    axes: Array
    prescribed: csr_array
    springs: tuple[SpringBlocks, ...]
    shares: tuple[Share, ...]
    directions: tuple[NDArray[np.int64], Array]

    @property
    def nodes(self) -> NDArray[np.int64]:
        """Numbers of the nodes at which something is held."""
        return np.flatnonzero(self.held.any(axis=1))


def resolve_supports(job: Job, mesh: Mesh) -> Supports:
    """Put the supports of a job on a mesh.

    Raises
    ------
    MeshError   a support catches nothing, has no direction there, or contradicts another one;
        carries the faults of all supports.
    """
    asked = held_by(job, Finder(mesh))
    rows = asked.rows
    slots = _choose(rows)
    prescribed = _prescribe(rows, slots, job, mesh.node_count)
    _check_values(rows, slots, prescribed, job, mesh)
    held, turned, axes = _local_axes(slots, mesh.node_count)
    shares = _shares(rows, slots, len(job.supports))
    return Supports(held, turned, axes, prescribed, asked.springs, shares, asked.directions())


# --- which rows hold a node --------------------------------------------------------------------


@dataclass(frozen=True, eq=False)
class Slots:
    """Which rows hold each supported node.

    first, second : row numbers by supported node; second is -1 where one direction is held.
    of_row : (r,) 1 or 2, the slot that a row is parallel to; 0 for a third direction.
    sign : (r,) +1 or -1, against the direction of that slot.
    node_index : (r,) position of the row's node among the supported nodes.
    """

    nodes: NDArray[np.int64]
    first: NDArray[np.int64]
    second: NDArray[np.int64]
    of_row: NDArray[np.int64]
    sign: Array
    node_index: NDArray[np.int64]
    directions: Array  # (k, 2, 2): row i is the direction of slot i; (0, 0) where there is none


def _choose(rows: Rows) -> Slots:
    """Take the first row of each node, then the first that is not parallel to it."""
    nodes, first, node_index = np.unique(rows.node, return_index=True, return_inverse=True)
    of_row = np.where(_parallel(rows, first[node_index]), 1, 0)
    others = np.flatnonzero(of_row == 0)
    has_second, position = np.unique(node_index[others], return_index=True)
    second = np.full(len(nodes), -1, np.int64)
    second[has_second] = others[position]
    partner = second[node_index[others]]
    of_row[others[_parallel(rows.take(others), partner, rows)]] = 2
    directions = np.zeros((len(nodes), 2, 2))
    directions[:, 0] = rows.direction[first]
    directions[has_second, 1] = rows.direction[second[has_second]]
    own = directions[node_index, np.maximum(of_row - 1, 0)]
    sign = np.where(np.einsum("ri,ri->r", own, rows.direction) < 0, -1.0, 1.0)
    return Slots(nodes, first, second, of_row, sign, node_index, directions)


def _parallel(rows: Rows, partner: NDArray, among: Rows | None = None) -> Mask:
    """Whether each row is parallel to its partner, a row of `among`."""
    other = (among or rows).take(partner)
    d, e = rows.direction, other.direction
    sine = np.abs(d[:, 0] * e[:, 1] - d[:, 1] * e[:, 0])
    return sine <= np.sin(PARALLEL + np.minimum(rows.blur + other.blur, 0.5))


# --- prescribed values -------------------------------------------------------------------------


def _prescribe(rows: Rows, slots: Slots, job: Job, node_count: int) -> csr_array:
    """Displacement of the held part of every node, (2N, c), from the values of its rows."""
    cases = len(job.load_cases)
    stating = np.flatnonzero((rows.value != 0) & (slots.of_row > 0))
    row, case = _by_case(stating, rows.case[stating], cases)
    key = (slots.node_index[row] * 2 + slots.of_row[row] - 1) * cases + case
    key, once = np.unique(key, return_index=True)  # who disagrees is found by _check_values
    row = row[once]
    pair, case = np.divmod(key, cases)
    node, slot = np.divmod(pair, 2)
    displacement = _dual(slots)[node, slot] * (rows.value[row] * slots.sign[row])[:, None]
    dof = 2 * slots.nodes[node][:, None] + np.arange(2)
    return coo_array(
        (displacement.ravel(), (dof.ravel(), np.repeat(case, 2))), shape=(2 * node_count, cases)
    ).tocsr()


def _by_case(row: NDArray, case: NDArray, cases: int) -> tuple[NDArray, NDArray]:
    """Repeat the rows that state their value for all cases."""
    general = case == ALL
    return (
        np.concatenate((row[~general], np.repeat(row[general], cases))),
        np.concatenate((case[~general], np.tile(np.arange(cases), int(general.sum())))),
    )


def _dual(slots: Slots) -> Array:
    """(k, 2, 2): row i is dual to direction i, d_i . w_j = 1 if i == j else 0.

    Displacement = sum of value_i w_i; with one direction the dual is the direction itself. The
    part of a reaction R along direction i is R . w_i.
    """
    dual = slots.directions.copy()
    both = slots.second >= 0
    dual[both] = np.linalg.inv(slots.directions[both]).transpose(0, 2, 1)
    return dual


def _check_values(rows: Rows, slots: Slots, prescribed: csr_array, job: Job, mesh: Mesh) -> None:
    """Every row must find its own value in the displacement that all rows together prescribe."""
    if not rows.value.any():
        return
    cases = len(job.load_cases)
    d = rows.direction
    found = _scale(prescribed[2 * rows.node], d[:, 0]) + _scale(
        prescribed[2 * rows.node + 1], d[:, 1]
    )
    stating = np.flatnonzero(rows.value)
    row, case = _by_case(stating, rows.case[stating], cases)
    wanted = coo_array((rows.value[row], (row, case)), shape=found.shape)
    difference = (found - wanted.tocsr()).tocoo()
    row, case = difference.coords
    spoken = (rows.case[row] == ALL) | (rows.case[row] == case)
    allowed = (CONSISTENT + 2 * rows.blur[row]) * np.abs(rows.value).max()
    wrong = spoken & (np.abs(difference.data) > allowed)
    faults: dict[str, Fault] = {}
    for r in row[wrong]:
        fault = _contradiction(int(r), rows, slots, job, mesh)
        faults.setdefault(fault.pointer, fault)
    if faults:
        raise MeshError(faults.values())


def _scale(matrix: csr_array, factors: Array) -> csr_array:
    scaled = matrix.copy()
    scaled.data = scaled.data * np.repeat(factors, np.diff(matrix.indptr))
    return scaled


def _contradiction(row: int, rows: Rows, slots: Slots, job: Job, mesh: Mesh) -> Fault:
    x, y = mesh.nodes[rows.node[row]]
    support = job.supports[rows.support[row]]
    at_node = np.unique(rows.support[rows.node == rows.node[row]])
    others = [repr(job.supports[k].label) for k in at_node if k != rows.support[row]]
    against = " and ".join(others) or "another direction of this support"
    return Fault(
        support.pointer,
        f"at ({x:g}, {y:g}) the support {support.label!r} asks for a displacement of "
        f"{rows.value[row]:g} that contradicts {against}; give both the same value, or keep the "
        "supports apart",
    )


# --- axes and shares ---------------------------------------------------------------------------


def _local_axes(slots: Slots, node_count: int) -> tuple[Mask, NDArray, Array]:
    """Held dofs, and the axes of nodes that are held along one skew direction."""
    held = np.zeros((node_count, 2), dtype=bool)
    held[slots.nodes[slots.second >= 0]] = True
    single = slots.second < 0
    nodes, d = slots.nodes[single], slots.directions[single, 0]
    along_x, along_y = np.abs(d[:, 1]) <= PARALLEL, np.abs(d[:, 0]) <= PARALLEL
    held[nodes[along_x], 0] = True
    held[nodes[along_y], 1] = True
    skew = ~(along_x | along_y)
    held[nodes[skew], 0] = True
    d = d[skew]
    axes = np.stack([d, np.stack([-d[:, 1], d[:, 0]], axis=1)], axis=2)
    return held, nodes[skew], axes


def _shares(rows: Rows, slots: Slots, supports: int) -> tuple[Share, ...]:
    """Give each held direction to the support whose row holds it."""
    dual = _dual(slots)
    both = slots.second >= 0
    row = np.concatenate((slots.first, slots.second[both]))
    node = np.concatenate((slots.nodes, slots.nodes[both]))
    direction = np.concatenate((slots.directions[:, 0], slots.directions[both, 1]))
    measure = np.concatenate((dual[:, 0], dual[both, 1]))
    owner = rows.support[row]
    return tuple(
        Share(node[owner == k], direction[owner == k], measure[owner == k]) for k in range(supports)
    )
