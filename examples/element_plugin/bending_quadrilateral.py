"""QM6: the four-node quadrilateral with incompatible bending modes, as a plug-in of its own."""

import numpy as np

from elements.contract import Array, strain_matrix
from elements.q4 import Q4
from elements.quadrature import quadrilateral


class QM6(Q4):
    """Q4 with two internal displacement modes, 1 - xi^2 and 1 - eta^2, condensed in each element.

    The modes let the element bend; they are not shared with its neighbours, so displacements do not
    fit together along sides except in the limit. Their gradients use the Jacobian of the element's
    centre, weighted so that they do no work in a state of constant stress: with that the patch test
    is passed on any shape.

    References
    ----------
    Wilson, Taylor, Doherty & Ghaboussi, "Incompatible displacement models", in *Numerical and
    Computer Methods in Structural Mechanics* (1973); Taylor, Beresford & Wilson, "A non-conforming
    element for stress analysis", Int. J. Numer. Meth. Eng. 10 (1976), for the corrected gradients.
    """

    name = "QM6"

    def recovery_points(self) -> Array:
        # The stress is no longer constant across a bent element: sample it where it is integrated.
        return quadrilateral(2).points

    def stiffness(self, coords: Array, constitutive: Array, thickness: Array) -> Array:
        """As the contract says; the internal modes are condensed: K - L^T H^-1 L."""
        K, L, H = self._parts(coords, constitutive, thickness)
        return K - np.matmul(L.transpose(0, 2, 1), np.linalg.solve(H, L))

    def stress_operator(self, coords: Array, constitutive: Array, points: Array) -> Array:
        """D (B - B_i H^-1 L): the internal modes follow from the nodes' displacements."""
        _, L, H = self._parts(coords, constitutive, np.ones(len(coords)))
        B = self.strain_operator(coords, points)
        B_i = self._internal_strain(coords, points)
        return np.matmul(constitutive[:, None], B - np.matmul(B_i, np.linalg.solve(H, L)[:, None]))

    def _parts(
        self, coords: Array, constitutive: Array, thickness: Array
    ) -> tuple[Array, Array, Array]:
        """Stiffness of the nodes (m, 8, 8), coupling (m, 4, 8), that of the modes (m, 4, 4)."""
        points, weights = self.stiffness_rule()
        _, det_J = self.jacobian(coords, points)
        volume = (det_J * weights * thickness[:, None])[..., None, None]
        B, B_i = self.strain_operator(coords, points), self._internal_strain(coords, points)
        stress = np.matmul(constitutive[:, None], B) * volume
        stress_i = np.matmul(constitutive[:, None], B_i) * volume

        def total(left: Array, right: Array) -> Array:
            return np.matmul(left.transpose(0, 1, 3, 2), right).sum(axis=1)

        return total(B, stress), total(B_i, stress), total(B_i, stress_i)

    def _internal_strain(self, coords: Array, points: Array) -> Array:
        """Strain of the internal modes, (m, q, 3, 4)."""
        J_centre, det_centre = self.jacobian(coords, np.zeros((1, 2)))
        _, det_J = self.jacobian(coords, points)
        xi, eta = points.T
        zero = np.zeros_like(xi)
        natural = np.stack(
            (np.stack((-2 * xi, zero), axis=1), np.stack((zero, -2 * eta), axis=1)), axis=2
        )  # (q, 2, modes)
        G = np.linalg.solve(J_centre, natural)
        return strain_matrix(G * (det_centre / det_J)[..., None, None])
