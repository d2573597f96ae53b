"""Q4: the four-node quadrilateral with bilinear displacements."""

import numpy as np

from elements.contract import Array, ElementType
from elements.quadrature import Rule, quadrilateral


class Q4(ElementType):
    """Bilinear quadrilateral, full 2x2 integration: no spurious modes, too stiff in bending.

    References
    ----------
    Taig, "Structural analysis by the matrix displacement method", English Electric Aviation
    Report S017 (1961); Irons, "Engineering application of numerical integration in stiffness
    methods", AIAA Journal 4 (1966).
    """

    name = "Q4"
    corners = 4
    order = 1
    natural_nodes = np.array([[-1.0, -1.0], [1.0, -1.0], [1.0, 1.0], [-1.0, 1.0]])
    sides = ((0, 1), (1, 2), (2, 3), (3, 0))
    vtk_cell_type = 9

    def shape_functions(self, points: Array) -> Array:
        xi, eta = np.asarray(points)[:, None, :].T
        xi_n, eta_n = self.natural_nodes.T[:, :, None]
        return ((1 + xi * xi_n) * (1 + eta * eta_n) / 4).T

    def gradients(self, points: Array) -> Array:
        xi, eta = np.asarray(points)[:, None, :].T
        xi_n, eta_n = self.natural_nodes.T[:, :, None]
        dN_dxi = xi_n * (1 + eta * eta_n) / 4
        dN_deta = (1 + xi * xi_n) * eta_n / 4
        return np.stack((dN_dxi.T, dN_deta.T), axis=1)

    def stiffness_rule(self) -> Rule:
        return quadrilateral(2)

    def load_rule(self) -> Rule:
        return quadrilateral(2)

    def recovery_points(self) -> Array:
        return quadrilateral(1).points
