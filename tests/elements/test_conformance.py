"""The conformance kit passes sound types and names what is wrong with broken ones."""

import numpy as np
import pytest
from numpy.typing import NDArray

from elements import registry
from elements.conformance import CHECKS, assert_conforms, check
from elements.contract import ElementType
from elements.q4 import Q4
from elements.q8 import Q8
from elements.quadrature import Rule, quadrilateral, triangle
from elements.t3 import T3
from elements.t6 import T6

Array = NDArray[np.float64]


@pytest.mark.parametrize("name", ["T3", "T6", "Q4", "Q8"])
def test_built_in_types_conform(name: str) -> None:
    assert check(registry.get(name)) == []


# --- a type with condensed internal modes: the override route --------------------------------


class Incompatible(Q4):
    """Wilson's modes 1 - xi^2, 1 - eta^2, condensed; with Taylor's correction it passes the patch
    test on any shape, without it on parallelograms only.

    Wilson et al. 1973; Taylor, Beresford & Wilson, Int. J. Numer. Meth. Engng 10 (1976).
    """

    corrected = True

    def _modes(self, coords: Array, points: Array) -> Array:
        """Strain operator of the internal modes, (m, q, 3, 4)."""
        J, det_J = self.jacobian(coords, points)
        if self.corrected:  # the Jacobian of the centre, so that the mean strain is zero
            centre, det_centre = self.jacobian(coords, np.zeros((1, 2)))
            J = np.linalg.inv(centre) * (det_centre[:, :, None, None] / det_J[:, :, None, None])
        else:
            J = np.linalg.inv(J)
        natural = np.zeros((len(points), 2, 2))
        natural[:, 0, 0], natural[:, 1, 1] = -2 * points[:, 0], -2 * points[:, 1]
        G = J @ natural
        B = np.zeros((*G.shape[:2], 3, 4))
        B[..., 0, 0::2] = B[..., 2, 1::2] = G[..., 0, :]
        B[..., 1, 1::2] = B[..., 2, 0::2] = G[..., 1, :]
        return B

    def _integrals(self, coords: Array, law: Array, thickness: Array) -> tuple[Array, Array]:
        points, weights = self.stiffness_rule()
        B, M = self.strain_operator(coords, points), self._modes(coords, points)
        volume = self.jacobian(coords, points)[1] * weights * thickness[:, None]
        inner = np.einsum("mqia,mij,mqjb,mq->mab", M, law, M, volume)
        return np.einsum("mqia,mij,mqjb,mq->mab", M, law, B, volume), inner

    def stiffness(self, coords: Array, constitutive: Array, thickness: Array) -> Array:
        coupling, inner = self._integrals(coords, constitutive, thickness)
        condensed = coupling.transpose(0, 2, 1) @ np.linalg.solve(inner, coupling)
        return super().stiffness(coords, constitutive, thickness) - condensed

    def stress_operator(self, coords: Array, constitutive: Array, points: Array) -> Array:
        coupling, inner = self._integrals(coords, constitutive, np.ones(len(coords)))
        follow = np.linalg.solve(inner, coupling)
        strain = (
            self.strain_operator(coords, points) - self._modes(coords, points) @ follow[:, None]
        )
        return constitutive[:, None] @ strain


class Uncorrected(Incompatible):
    corrected = False


def test_a_type_with_condensed_internal_modes_conforms() -> None:
    assert_conforms(Incompatible())


def test_internal_modes_without_the_correction_fail_the_patch_test() -> None:
    """Known since 1973: Wilson's element converges on parallelograms only."""
    assert any(failure.startswith("patch test") for failure in check(Uncorrected()))


# --- types that are broken on purpose --------------------------------------------------------


class ClaimsWrongCell(Q8):
    vtk_cell_type = 9


class HalfShapeFunctions(T6):
    def shape_functions(self, points: Array) -> Array:
        return 0.5 * super().shape_functions(points)


class SwappedMidSides(Q8):
    def shape_functions(self, points: Array) -> Array:
        return super().shape_functions(points)[:, [0, 1, 2, 3, 5, 4, 6, 7]]


class WrongGradient(T6):
    def gradients(self, points: Array) -> Array:
        gradients = super().gradients(points).copy()
        gradients[:, 1, 3] *= 1.01
        return gradients


class HeavyRule(T3):
    def load_rule(self) -> Rule:
        return Rule(triangle(2).points, triangle(2).weights * 2)


class RecoveryOutside(T3):
    def recovery_points(self) -> Array:
        return np.array([[1.0, 1.0]])


class Grounded(Q4):
    def stiffness(self, coords: Array, constitutive: Array, thickness: Array) -> Array:
        return super().stiffness(coords, constitutive, thickness) + 1e-3 * np.eye(8)


class UnderIntegratedQ8(Q8):
    def stiffness_rule(self) -> Rule:
        return quadrilateral(2)


class UnderIntegratedQ4(Q4):
    def stiffness_rule(self) -> Rule:
        return quadrilateral(1)


class UnderIntegratedT6(T6):
    """Sound on straight sides; loses a mode on some curved ones."""

    def stiffness_rule(self) -> Rule:
        return triangle(2)


class Lopsided(T3):
    def stiffness(self, coords: Array, constitutive: Array, thickness: Array) -> Array:
        K = super().stiffness(coords, constitutive, thickness)
        K[:, 0, 1] *= 1.001
        return K


class StifferAlongX(Q4):
    """An hourglass stiffness against u alone: right in the patch test, but not on turned axes."""

    def stiffness(self, coords: Array, constitutive: Array, thickness: Array) -> Array:
        h = np.array([1.0, -1.0, 1.0, -1.0])
        ones = np.ones((len(coords), 4, 1))
        linear = np.concatenate((ones, coords), axis=2)
        kept = linear @ np.linalg.solve(
            linear.transpose(0, 2, 1) @ linear, linear.transpose(0, 2, 1)
        )
        gamma = np.zeros((len(coords), 8))
        gamma[:, 0::2] = h - kept @ h
        extra = thickness[:, None, None] * constitutive[:, :1, :1] * 0.1
        extra = extra * gamma[:, :, None] * gamma[:, None, :]
        return super().stiffness(coords, constitutive, thickness) + extra


class FirstThicknessForAll(T6):
    def stiffness(self, coords: Array, constitutive: Array, thickness: Array) -> Array:
        return super().stiffness(coords, constitutive, np.full_like(thickness, thickness[0]))


class AcceptsClockwise(T3):
    def jacobian(self, coords: Array, points: Array) -> tuple[Array, Array]:
        J = np.einsum("qin,mnk->mqik", self.gradients(points), coords)
        return J, np.abs(np.linalg.det(J))


class DropsCoupling(Q4):
    """Ignores the stretch-shear terms of the law."""

    def stiffness(self, coords: Array, constitutive: Array, thickness: Array) -> Array:
        law = constitutive.copy()
        law[:, :2, 2] = law[:, 2, :2] = 0
        return super().stiffness(coords, law, thickness)


class TensorShear(T3):
    def stress_operator(self, coords: Array, constitutive: Array, points: Array) -> Array:
        operator = super().stress_operator(coords, constitutive, points)
        operator[:, :, 2] /= 2
        return operator


class HotterThanItShould(Q8):
    def initial_strain_load(
        self, coords: Array, constitutive: Array, thickness: Array, strain: Array
    ) -> Array:
        return 1.1 * super().initial_strain_load(coords, constitutive, thickness, strain)


class LumpedSide(T6):
    def side_load(self, coords: Array, side: int, traction: Array) -> Array:
        load = super().side_load(coords, side, traction)
        lumped = np.zeros_like(load)
        lumped[:, list(self.sides[side])] = load.sum(axis=1, keepdims=True) / 3
        return lumped


class ReversedSide(Q4):
    def side_points(self, coords: Array, side: int) -> tuple[Array, Array]:
        position, tangent = super().side_points(coords, side)
        return position, -tangent


class ChordForArc(Q8):
    """Takes the chord for the length of a curved side."""

    def side_load(self, coords: Array, side: int, traction: Array) -> Array:
        a, b = self.sides[side][:2]
        half = np.linalg.norm(coords[:, b] - coords[:, a], axis=-1) / 2
        N = self.shape_functions(self.side_natural_points(side))
        length = half[:, None] * self.side_rule().weights
        return N.T @ (length[..., None] * traction)


class LumpedBody(Q8):
    def body_load(self, coords: Array, thickness: Array, force: Array) -> Array:
        load = super().body_load(coords, thickness, force)
        return np.broadcast_to(load.mean(axis=1, keepdims=True), load.shape)


class CoarseLoadRule(T3):
    def load_rule(self) -> Rule:
        return triangle(1)


class LostPoints(Q4):
    def natural_coordinates(self, coords: Array, xy: Array) -> tuple[Array, NDArray[np.bool_]]:
        return np.zeros((len(coords), 2)), np.ones(len(coords), dtype=bool)


class LinearInDisguise(T6):
    """Ties the mid-side nodes down with a penalty: passes the patch test as a T3 would."""

    def stiffness(self, coords: Array, constitutive: Array, thickness: Array) -> Array:
        tie = np.zeros((3, 6))
        for row, (a, b, mid) in zip(tie, self.sides, strict=True):
            row[[a, b, mid]] = -0.5, -0.5, 1.0
        penalty = np.kron(tie.T @ tie, np.eye(2))
        scale = 10 * thickness * np.trace(constitutive, axis1=1, axis2=2)
        return super().stiffness(coords, constitutive, thickness) + scale[:, None, None] * penalty


class Raises(T3):
    def recovery_points(self) -> Array:
        raise RuntimeError("not written yet")


BROKEN = [
    (ClaimsWrongCell, "declaration"),
    (HalfShapeFunctions, "shape functions sum to one"),
    (SwappedMidSides, "shape functions are one at their own node"),
    (WrongGradient, "gradients are derivatives"),
    (HeavyRule, "rules fit the shape"),
    (RecoveryOutside, "rules fit the shape"),
    (Grounded, "rigid motions cost nothing"),
    (UnderIntegratedQ8, "exactly three zero eigenvalues"),
    (UnderIntegratedQ4, "exactly three zero eigenvalues"),
    (UnderIntegratedT6, "exactly three zero eigenvalues"),
    (Lopsided, "stiffness is symmetric"),
    (StifferAlongX, "stiffness turns with the element"),
    (FirstThicknessForAll, "elements of a batch are independent"),
    (AcceptsClockwise, "clockwise elements are refused"),
    (DropsCoupling, "constant strain is exact"),
    (TensorShear, "constant strain is exact"),
    (TensorShear, "patch test"),
    (HotterThanItShould, "constant strain is exact"),
    (Uncorrected, "patch test"),
    (LumpedSide, "side loads do the right work"),
    (ReversedSide, "tension all round balances"),
    (ChordForArc, "tension all round balances"),
    (LumpedBody, "body loads do the right work"),
    (CoarseLoadRule, "body loads do the right work"),
    (LostPoints, "natural coordinates are found"),
    (LinearInDisguise, "errors fall at the right order"),
    (Raises, "rules fit the shape: raised RuntimeError"),
]


@pytest.mark.parametrize(
    ("kind", "expected"), BROKEN, ids=[f"{kind.__name__}-{expected}" for kind, expected in BROKEN]
)
def test_a_broken_type_is_caught_by_the_check_for_its_fault(
    kind: type[ElementType], expected: str
) -> None:
    failures = check(kind())
    assert any(failure.startswith(expected) for failure in failures), failures


def test_every_check_of_the_kit_is_shown_to_fail_for_some_broken_type() -> None:
    """No check that cannot fail."""
    shown = {expected.split(":")[0] for _, expected in BROKEN}
    assert {one.__name__.replace("_", " ") for one in CHECKS} <= shown


def test_assert_conforms_lists_the_failures_under_the_name_of_the_class() -> None:
    with pytest.raises(AssertionError, match="Lopsided does not conform") as caught:
        assert_conforms(Lopsided())
    assert "stiffness is symmetric" in str(caught.value)
