"""The element contract: what a plane-stress element must tell, and what follows from it.

Everything works on batches: m elements of one type at once, arrays in, arrays out. Assembly,
chunking of large meshes and supports are the business of `workers/analysis/`.
"""

import abc
from functools import lru_cache
from typing import ClassVar

import numpy as np
from numpy.typing import NDArray

from elements.errors import DegenerateElementError
from elements.quadrature import Rule, line

Array = NDArray[np.float64]
Mask = NDArray[np.bool_]
Side = tuple[int, int] | tuple[int, int, int]

# Newton's method on the isoparametric map: quadratic, so a point inside a usable element is
# found in 4-6 steps; what has not settled after 25 is not in the element.
NEWTON_STEPS = 25
NEWTON_TOLERANCE = 1e-12  # change of a natural coordinate, against 1 or 2 across the element
FEW_POINTS = 64  # a rule, not the places of something in a mesh


class ElementType(abc.ABC):
    """A plane-stress element with two displacements u, v at each node. This text is the manual.

    A new type is a class in its own package and one line of packaging::

        [project.entry-points."fishplate.elements"]
        NAME = "package.module:Class"

    Declare the class attributes, write the abstract methods, and the isoparametric defaults give
    stiffness, loads and stresses. Override what the type does better: a type with condensed
    internal modes overrides `stiffness` and `stress_operator` (and `initial_strain_load`).
    Instances hold no state. `elements.conformance.assert_conforms(Class())` says whether the
    type may be trusted.

    Declaration
    -----------
    name : what a job document calls it; equal to the name of the entry point
    corners : 3 or 4
    order : 1 (corners only) or 2 (corners, then one mid-side node for each side)
    natural_nodes : (n, 2)   triangles on (0, 0), (1, 0), (0, 1); quadrilaterals on [-1, 1]^2
    sides : local nodes (a, b) or (a, b, mid), counter-clockwise, side i from corner i to i + 1
    vtk_cell_type : 5, 22, 9 or 23, a cell with the same nodes in the same order

    Conventions
    -----------
    Nodes run counter-clockwise. Dofs u0, v0, u1, v1, ... Stress and strain xx, yy, xy, tension
    positive, engineering shear strain. m elements, n nodes, q points.
    """

    name: ClassVar[str]
    corners: ClassVar[int]
    order: ClassVar[int]
    natural_nodes: ClassVar[Array]
    sides: ClassVar[tuple[Side, ...]]
    vtk_cell_type: ClassVar[int]

    # --- what a type must tell ---------------------------------------------------------------

    @abc.abstractmethod
    def shape_functions(self, points: Array) -> Array:
        """Shape functions at natural points (q, 2): (q, n)."""

    @abc.abstractmethod
    def gradients(self, points: Array) -> Array:
        """Derivatives of the shape functions by the natural coordinates: (q, 2, n)."""

    @abc.abstractmethod
    def stiffness_rule(self) -> Rule:
        """Rule for the stiffness: exact on straight sides, and no zero-energy mode."""

    @abc.abstractmethod
    def load_rule(self) -> Rule:
        """Rule for loads on the area and for squared stresses (the error estimate)."""

    @abc.abstractmethod
    def recovery_points(self) -> Array:
        """Natural points (r, 2) where the stress is most accurate (superconvergent)."""

    # --- shape -------------------------------------------------------------------------------

    @property
    def node_count(self) -> int:
        return len(self.natural_nodes)

    @property
    def is_triangle(self) -> bool:
        return self.corners == 3

    def side_rule(self) -> Rule:
        """Rule on [-1, 1] for side loads: exact for a linear traction on a straight side."""
        return line(self.order + 1)

    def jacobian(self, coords: Array, points: Array) -> tuple[Array, Array]:
        """Jacobian matrices of the map from natural to plate coordinates.

        Parameters
        ----------
        coords : (m, n, 2) array   node positions, counter-clockwise [L]
        points : (q, 2) array      natural coordinates

        Returns
        -------
        J : (m, q, 2, 2) array   J[..., i, j] = d x_j / d natural_i [L]
        det_J : (m, q) array     positive [L^2]

        Raises
        ------
        DegenerateElementError   det J <= 0 (or not a number) at a point; names the elements.
        """
        slopes = _gradients(self, points).reshape(-1, self.node_count)
        # One matrix product for all elements: far faster than m small ones.
        flat = coords.transpose(0, 2, 1).reshape(-1, self.node_count)
        J = (flat @ slopes.T).reshape(len(coords), 2, -1, 2).transpose(0, 2, 3, 1)
        det_J = J[..., 0, 0] * J[..., 1, 1] - J[..., 0, 1] * J[..., 1, 0]
        if not (det_J > 0).all():
            bad = np.flatnonzero(~(det_J > 0).all(axis=1))
            worst = np.nan_to_num(det_J[bad], nan=-np.inf).argmin(axis=1)
            raise DegenerateElementError(
                self.name, bad.tolist(), worst.tolist(), det_J[bad, worst].tolist()
            )
        return J, det_J

    def cartesian_gradients(self, coords: Array, points: Array) -> tuple[Array, Array]:
        """Derivatives of the shape functions by x and y.

        Returns
        -------
        G : (m, q, 2, n) array   d/dx, d/dy [1/L]
        det_J : (m, q) array     [L^2]
        """
        J, det_J = self.jacobian(coords, points)
        return self._pull_back(J, 1 / det_J, points), det_J

    def _pull_back(self, J: Array, scale: Array, points: Array) -> Array:
        """scale * adjugate(J) times the natural gradients: (m, q, 2, n)."""
        natural = _gradients(self, points)
        d_first, d_second = natural[:, 0], natural[:, 1]
        scaled = (J * scale[..., None, None])[..., None]
        G = np.empty((*scale.shape, 2, self.node_count))
        np.subtract(scaled[..., 1, 1, :] * d_first, scaled[..., 0, 1, :] * d_second, out=G[:, :, 0])
        np.subtract(scaled[..., 0, 0, :] * d_second, scaled[..., 1, 0, :] * d_first, out=G[:, :, 1])
        return G

    # --- strain, stress, stiffness -----------------------------------------------------------

    def strain_operator(self, coords: Array, points: Array) -> Array:
        """B: strain (xx, yy, engineering xy) from the element's dofs, (m, q, 3, 2n) [1/L]."""
        G, _ = self.cartesian_gradients(coords, points)
        return strain_matrix(G)

    def stress_operator(self, coords: Array, constitutive: Array, points: Array) -> Array:
        """Stress from the element's dofs, (m, q, 3, 2n) [F/L^3].

        What initial strain takes away (D eps0) is subtracted by the caller. The place to
        override for types whose strain is not that of the shape functions alone.
        """
        return np.matmul(constitutive[:, None], self.strain_operator(coords, points))

    def stiffness(self, coords: Array, constitutive: Array, thickness: Array) -> Array:
        """Stiffness matrices of a batch of elements, global axes.

        Parameters
        ----------
        coords : (m, n, 2) array         node positions, counter-clockwise [L]
        constitutive : (m, 3, 3) array   plane-stress law, symmetric, engineering shear [F/L^2]
        thickness : (m,) array           positive [L]

        Returns
        -------
        (m, 2n, 2n) array   symmetric; dofs u0, v0, u1, v1, ... [F/L]

        Raises
        ------
        DegenerateElementError   det J <= 0 at an integration point; names the elements.

        References
        ----------
        Zienkiewicz & Taylor, *The Finite Element Method*, vol. 1, integral of B^T D B. With D
        constant in an element, every 2x2 node block is a combination of the products of
        gradients, so one Gram product per element replaces B^T D B.
        """
        points, weights = self.stiffness_rule()
        J, det_J = self.jacobian(coords, points)
        n = self.node_count
        scale = np.sqrt(weights * thickness[:, None] / det_J)
        G = self._pull_back(J, scale, points).reshape(len(coords), -1, 2 * n)
        products = np.matmul(G.transpose(0, 2, 1), G).reshape(-1, 2, n, 2, n)
        return _node_blocks(products, constitutive).reshape(-1, 2 * n, 2 * n)

    # --- loads -------------------------------------------------------------------------------

    def body_load(self, coords: Array, thickness: Array, force: Array) -> Array:
        """Consistent nodal forces of a force per volume.

        Parameters
        ----------
        force : (m, q, 2) array   at the points of `load_rule` [F/L^3]

        Returns
        -------
        (m, n, 2) array   [F]
        """
        points, weights = self.load_rule()
        _, det_J = self.jacobian(coords, points)
        volume = det_J * weights * thickness[:, None]
        return np.matmul(self.shape_functions(points).T, volume[..., None] * force)

    def initial_strain_load(
        self, coords: Array, constitutive: Array, thickness: Array, strain: Array
    ) -> Array:
        """Nodal forces of an initial strain: the integral of B^T D eps0 t dA.

        Parameters
        ----------
        strain : (m, q, 3) array   at the points of `stiffness_rule`, engineering shear

        Returns
        -------
        (m, n, 2) array   [F]
        """
        points, weights = self.stiffness_rule()
        G, det_J = self.cartesian_gradients(coords, points)
        stress = np.matmul(strain, constitutive)  # the law is symmetric
        resultant = stress * (det_J * weights * thickness[:, None])[..., None]
        forces = np.empty((len(coords), self.node_count, 2))
        for axis, components in enumerate(((0, 2), (2, 1))):
            forces[..., axis] = np.einsum("mqin,mqi->mn", G, resultant[..., components])
        return forces

    def side_natural_points(self, side: int) -> Array:
        """Natural coordinates (q, 2) of the points of `side_rule` on a side."""
        a, b = self.sides[side][:2]
        s = self.side_rule().points[:, None]
        return ((1 - s) * self.natural_nodes[a] + (1 + s) * self.natural_nodes[b]) / 2

    def side_points(self, coords: Array, side: int) -> tuple[Array, Array]:
        """Positions and tangents at the points of `side_rule`, from the side's first corner on.

        Returns
        -------
        position : (m, q, 2) array   [L]
        tangent : (m, q, 2) array    dx/ds of [-1, 1] [L]; |tangent| weight is a length, and
            (t_y, -t_x)/|t| the outward normal
        """
        points = self.side_natural_points(side)
        a, b = self.sides[side][:2]
        direction = (self.natural_nodes[b] - self.natural_nodes[a]) / 2
        along = np.einsum("i,qin->qn", direction, self.gradients(points))
        return np.matmul(self.shape_functions(points), coords), np.matmul(along, coords)

    def side_load(self, coords: Array, side: int, traction: Array) -> Array:
        """Consistent nodal forces of a force per length of side.

        Parameters
        ----------
        traction : (m, q, 2) array   at the points of `side_points`, global axes [F/L]

        Returns
        -------
        (m, n, 2) array   [F]; zero at nodes that are not on the side
        """
        _, tangent = self.side_points(coords, side)
        length = np.linalg.norm(tangent, axis=-1) * self.side_rule().weights
        N = self.shape_functions(self.side_natural_points(side))
        return np.matmul(N.T, length[..., None] * traction)

    # --- the inverse map ---------------------------------------------------------------------

    def natural_coordinates(self, coords: Array, xy: Array) -> tuple[Array, Mask]:
        """Natural coordinates of one plate point in each element, by Newton's method.

        Parameters
        ----------
        coords : (m, n, 2) array   [L]
        xy : (m, 2) array          a point for each element [L]

        Returns
        -------
        natural : (m, 2) array
        converged : (m,) bool array   False where no solution was found (far outside)
        """
        m = len(coords)
        centre = self.natural_nodes[: self.corners].mean(axis=0)
        natural = np.tile(centre, (m, 1))
        converged = np.zeros(m, dtype=bool)
        # Seen from the point: of a plate far from the origin no digits are lost.
        coords = coords - xy[:, None]
        todo = np.arange(m)
        for _ in range(NEWTON_STEPS):
            at = natural[todo]
            residual = -np.einsum("mn,mnk->mk", self.shape_functions(at), coords[todo])
            J = np.matmul(self.gradients(at), coords[todo])
            det_J = J[:, 0, 0] * J[:, 1, 1] - J[:, 0, 1] * J[:, 1, 0]
            regular = det_J > 0  # a step that leaves the invertible part of the map is lost
            todo, J, residual = todo[regular], J[regular], residual[regular]
            step = np.linalg.solve(J.transpose(0, 2, 1), residual[..., None])[..., 0]
            natural[todo] += step
            settled = np.abs(step).max(axis=1, initial=0.0) < NEWTON_TOLERANCE
            converged[todo[settled]] = True
            todo = todo[~settled]
            if not todo.size:
                break
        return natural, converged

    def inside(self, natural: Array, tolerance: float = 1e-9) -> Mask:
        """Which natural points (m, 2) lie in the reference shape, its border included: (m,)."""
        if self.is_triangle:
            return (natural.min(axis=1) >= -tolerance) & (natural.sum(axis=1) <= 1 + tolerance)
        return np.abs(natural).max(axis=1) <= 1 + tolerance


def _gradients(element: ElementType, points: Array) -> Array:
    """`element.gradients`, remembered: every chunk of a mesh asks for the same few points."""
    if len(points) > FEW_POINTS:
        return element.gradients(points)
    return _remembered(element, np.asarray(points, float).tobytes())


@lru_cache(maxsize=256)
def _remembered(element: ElementType, points: bytes) -> Array:
    found = element.gradients(np.frombuffer(points).reshape(-1, 2))
    found.flags.writeable = False
    return found


def strain_matrix(G: Array) -> Array:
    """Strain operator (..., 3, 2n) from gradients (..., 2, n), engineering shear strain."""
    B = np.zeros((*G.shape[:-2], 3, 2 * G.shape[-1]))
    B[..., 0, 0::2] = B[..., 2, 1::2] = G[..., 0, :]
    B[..., 1, 1::2] = B[..., 2, 0::2] = G[..., 1, :]
    return B


def _node_blocks(products: Array, constitutive: Array) -> Array:
    """Stiffness (m, n, 2, n, 2) from integrals of gradient products (m, 2, n, 2, n).

    Written out, B_a^T D B_b needs only xx = dNa/dx dNb/dx, xy = dNa/dx dNb/dy, and so on.
    """
    m, _, n, _, _ = products.shape
    xx, xy = products[:, 0, :, 0], products[:, 0, :, 1]
    yx, yy = products[:, 1, :, 0], products[:, 1, :, 1]
    D = constitutive[:, :, :, None, None]
    K = np.empty((m, n, 2, n, 2))
    K[:, :, 0, :, 0] = D[:, 0, 0] * xx + D[:, 2, 2] * yy
    K[:, :, 1, :, 1] = D[:, 1, 1] * yy + D[:, 2, 2] * xx
    K[:, :, 0, :, 1] = D[:, 0, 1] * xy + D[:, 2, 2] * yx
    if constitutive[:, :2, 2].any():  # stretch and shear coupled: principal axes are turned
        mixed = xy + yx
        K[:, :, 0, :, 0] += D[:, 0, 2] * mixed
        K[:, :, 1, :, 1] += D[:, 1, 2] * mixed
        K[:, :, 0, :, 1] += D[:, 0, 2] * xx + D[:, 1, 2] * yy
    K[:, :, 1, :, 0] = K[:, :, 0, :, 1].transpose(0, 2, 1)
    return K
