"""Q8: the eight-node serendipity quadrilateral, with curved sides if wanted."""

import numpy as np

from elements.contract import Array, ElementType
from elements.quadrature import Rule, quadrilateral


class Q8(ElementType):
    """Serendipity quadrilateral: corners, then mid-side nodes 1-2, 2-3, 3-4, 4-1.

    References
    ----------
    Ergatoudis, Irons & Zienkiewicz, "Curved, isoparametric, quadrilateral elements for finite
    element analysis", Int. J. Solids Structures 4 (1968). Superconvergent 2x2 points: Barlow,
    "Optimal stress locations in finite element models", Int. J. Numer. Meth. Engng 10 (1976).
    """

    name = "Q8"
    corners = 4
    order = 2
    natural_nodes = np.array(
        [
            [-1.0, -1.0],
            [1.0, -1.0],
            [1.0, 1.0],
            [-1.0, 1.0],
            [0.0, -1.0],
            [1.0, 0.0],
            [0.0, 1.0],
            [-1.0, 0.0],
        ]
    )
    sides = ((0, 1, 4), (1, 2, 5), (2, 3, 6), (3, 0, 7))
    vtk_cell_type = 23

    def shape_functions(self, points: Array) -> Array:
        xi, eta = np.asarray(points).T
        left, right, low, high = 1 - xi, 1 + xi, 1 - eta, 1 + eta
        return np.stack(
            (
                -left * low * (1 + xi + eta) / 4,
                -right * low * (1 - xi + eta) / 4,
                -right * high * (1 - xi - eta) / 4,
                -left * high * (1 + xi - eta) / 4,
                left * right * low / 2,
                low * high * right / 2,
                left * right * high / 2,
                low * high * left / 2,
            ),
            axis=-1,
        )

    def gradients(self, points: Array) -> Array:
        xi, eta = np.asarray(points).T
        left, right, low, high = 1 - xi, 1 + xi, 1 - eta, 1 + eta
        dN_dxi = (
            low * (2 * xi + eta) / 4,
            low * (2 * xi - eta) / 4,
            high * (2 * xi + eta) / 4,
            high * (2 * xi - eta) / 4,
            -xi * low,
            low * high / 2,
            -xi * high,
            -low * high / 2,
        )
        dN_deta = (
            left * (xi + 2 * eta) / 4,
            right * (2 * eta - xi) / 4,
            right * (xi + 2 * eta) / 4,
            left * (2 * eta - xi) / 4,
            -left * right / 2,
            -eta * right,
            left * right / 2,
            -eta * left,
        )
        return np.stack((np.stack(dN_dxi, axis=-1), np.stack(dN_deta, axis=-1)), axis=1)

    def stiffness_rule(self) -> Rule:
        # 2x2 leaves one zero-energy mode in a lone element, 3x3 none.
        return quadrilateral(3)

    def load_rule(self) -> Rule:
        return quadrilateral(3)

    def recovery_points(self) -> Array:
        return quadrilateral(2).points
