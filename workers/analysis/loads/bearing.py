"""The force of a pin on the wall of its hole: a cosine pressure over the loaded half.

The pressure is max(0, r . c) with r the radial direction and c a vector. For a round hole in a fine
mesh c is parallel to the force; on any mesh c is found such that the resultant is exactly the
force. All of it passes through the centre, so the pin turns nothing.

References
----------
The cosine distribution is common practice for a pin with small clearance, e.g. Peterson's Stress
Concentration Factors, chapter on pinned joints (from memory).
"""

import numpy as np
from numpy.typing import NDArray

from workers.analysis.circle_fit import fit_circle
from workers.analysis.loads.side import Side
from workers.errors import Fault, MeshError

Array = NDArray[np.float64]

STEPS = 60
SETTLED = 1e-13
ILL_FACED = 1e-6  # ratio of the eigenvalues of the sum of r r^T: the side faces one way only


def bearing_load(side: Side, nodes: Array, force: tuple[float, float], pointer: str) -> Array:
    """Force per length at the points of the wall of a round hole, (p, 2) [F/L].

    Parameters
    ----------
    nodes : (k, 2) array   positions of the side's nodes [L]

    Raises
    ------
    MeshError   the side does not face the force.
    """
    centre, _ = fit_circle(nodes)
    radial = side.position - centre
    radial /= np.linalg.norm(radial, axis=1, keepdims=True)
    c = _balance(radial, side.length, np.asarray(force, float), pointer)
    return np.maximum(radial @ c, 0.0)[:, None] * radial


def _balance(radial: Array, length: Array, force: Array, pointer: str) -> Array:
    """Find c with sum of max(0, r . c) r ds = force.

    The sum is the gradient of a convex, piecewise quadratic function of c; Newton's method with
    the points pressed at present ends after finitely many steps.
    """
    c = np.asarray(force, float)
    for _ in range(STEPS):
        pressed = radial @ c > 0
        r, ds = radial[pressed], length[pressed]
        M = np.einsum("p,pi,pj->ij", ds, r, r)
        low, high = np.linalg.eigvalsh(M)
        if not low > ILL_FACED * high:
            break
        c = np.linalg.solve(M, force)
        pressure = np.maximum(radial @ c, 0.0)
        missing = force - np.einsum("p,p,pi->i", length, pressure, radial)
        if np.abs(missing).max() <= SETTLED * np.abs(force).max():
            return c
    message = "no pressure on this side can balance the force: it faces elsewhere"
    raise MeshError([Fault(pointer, message)])
