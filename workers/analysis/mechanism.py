"""What is free to move: words for a motion that costs no energy."""

import numpy as np
from numpy.typing import NDArray

from workers.analysis.mesh import Mesh

Array = NDArray[np.float64]

MOVES = 0.1  # of the largest displacement: less counts as standing still
RIGID = 0.05  # misfit of a rigid motion, of the largest displacement
TURNS = 0.05  # part of the displacement due to rotation, below which a motion is a translation


def describe_motion(mesh: Mesh, motion: Array) -> str:
    """One sentence about a motion (N, 2): what moves, and whether it slides or turns.

    Fits displacement = t + omega x r to the nodes that move.
    """
    size = np.linalg.norm(motion, axis=1)
    moving = size >= MOVES * size.max()
    points, moved = mesh.nodes[moving], motion[moving] / size.max()
    middle = points.mean(axis=0)
    arm = points - middle
    reach = np.linalg.norm(arm, axis=1).max()
    shift = moved.mean(axis=0)
    inertia = (arm**2).sum()
    turn = (arm[:, 0] * moved[:, 1] - arm[:, 1] * moved[:, 0]).sum() / inertia if inertia else 0.0
    rigid = shift + turn * np.stack([-arm[:, 1], arm[:, 0]], axis=1)
    everywhere = mesh.nodes - middle
    carried = shift + turn * np.stack([-everywhere[:, 1], everywhere[:, 0]], axis=1)
    whole = np.abs(carried - motion / size.max()).max() < RIGID
    what = "the plate" if whole else _moving_part(moving, middle)
    if np.abs(rigid - moved).max() > RIGID:
        x, y = mesh.nodes[np.argmax(size)]
        return f"{what} can move without resistance, most of all at ({x:.4g}, {y:.4g})"
    if abs(turn) * reach < TURNS:
        return f"{what} can slide along ({_tidy(shift[0])}, {_tidy(shift[1])})"
    x, y = middle[0] - shift[1] / turn, middle[1] + shift[0] / turn
    tiny = 1e-6 * mesh.diagonal
    return f"{what} can rotate about ({_tidy(x, tiny)}, {_tidy(y, tiny)})"


def _moving_part(moving: NDArray[np.bool_], middle: Array) -> str:
    x, y = middle
    return f"a part of the plate ({moving.sum()} nodes around ({x:.4g}, {y:.4g}))"


def _tidy(value: float, tiny: float = 1e-3) -> str:
    return f"{0.0 if abs(value) < tiny else value:.4g}"
