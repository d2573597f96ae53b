"""T3: the three-node triangle with linear displacements and constant strain."""

import numpy as np

from elements.contract import Array, ElementType
from elements.quadrature import Rule, triangle


class T3(ElementType):
    """Constant-strain triangle; needs fine meshes, and is far too stiff in bending.

    References
    ----------
    Turner, Clough, Martin & Topp, "Stiffness and deflection analysis of complex structures",
    J. Aeronaut. Sci. 23 (1956).
    """

    name = "T3"
    corners = 3
    order = 1
    natural_nodes = np.array([[0.0, 0.0], [1.0, 0.0], [0.0, 1.0]])
    sides = ((0, 1), (1, 2), (2, 0))
    vtk_cell_type = 5

    def shape_functions(self, points: Array) -> Array:
        r, s = np.asarray(points).T
        return np.stack((1 - r - s, r, s), axis=-1)

    def gradients(self, points: Array) -> Array:
        slopes = np.array([[-1.0, 1.0, 0.0], [-1.0, 0.0, 1.0]])
        return np.broadcast_to(slopes, (len(points), 2, 3))

    def stiffness_rule(self) -> Rule:
        return triangle(1)

    def load_rule(self) -> Rule:
        return triangle(2)

    def recovery_points(self) -> Array:
        return triangle(1).points
