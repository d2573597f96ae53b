"""The error estimate against the true error of problems with a closed form."""

import numpy as np
import pytest

from tests.exact_solutions import Exact, kirsch, measure_errors, solve_with_exact_border, waves
from tests.plates import ELEMENTS, MIXED, grid, plate_job, warp
from workers.analysis.error_estimate import error_stress, estimate_error
from workers.analysis.mesh import PLATE
from workers.analysis.model import Model, build_model
from workers.analysis.recovery import Recovery
from workers.analysis.solution import solve
from workers.geometry import Region
from workers.job import Named, Support, TotalForce

E, NU, T = 1000.0, 0.3, 2.0


def quarter_with_hole(kind: str, cells: int) -> Model:
    """A quarter ring around the hole of radius 1, finer towards it."""

    def shape(x: np.ndarray, y: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        r, t = 1 + 3 * (np.exp(1.5 * x) - 1) / (np.exp(1.5) - 1), np.pi / 2 * y
        return r * np.cos(t), r * np.sin(t)

    job = plate_job(youngs_modulus=E, poissons_ratio=NU, thickness=T)
    return build_model(job, grid(kind, cells, cells, shape=shape))


def square(kind: str, cells: int) -> Model:
    job = plate_job(youngs_modulus=E, poissons_ratio=NU, thickness=T)
    return build_model(job, grid(kind, cells, cells, shape=warp))


def _effectivity(model: Model, exact: Exact) -> float:
    """Estimated over true error, in the energy norm of the whole plate."""
    u = solve_with_exact_border(model, exact)
    recovery = Recovery.build(model)
    nodal = recovery.nodal_stress(u)
    true = measure_errors(model, exact, u, nodal, recovery.field_mesh.connectivity)
    return float(estimate_error(recovery, u, nodal).energy_norm[0]) / true.raw


@pytest.mark.parametrize("kind", ELEMENTS + MIXED)
@pytest.mark.parametrize("case", ["hole", "waves"])
def test_estimate_is_within_a_fifth_of_the_true_error(kind: str, case: str) -> None:
    """0.8 to 1.2 on smooth problems, the range that Zienkiewicz & Zhu report for a fair mesh."""
    if case == "hole":
        effectivity = _effectivity(quarter_with_hole(kind, 16), kirsch(E, NU))
    else:
        effectivity = _effectivity(square(kind, 12), waves(E, NU))
    print(f"{kind} {case}: effectivity {effectivity:.3f}")
    assert 0.8 < effectivity < 1.2


@pytest.mark.parametrize("kind", ["Q4", "T6"])
def test_estimate_tends_to_the_true_error_under_refinement(kind: str) -> None:
    """Asymptotically exact where the recovered stress converges faster than the raw one."""
    coarse, fine = (abs(_effectivity(square(kind, n), waves(E, NU)) - 1) for n in (6, 24))
    assert fine < max(0.06, coarse)


def test_estimate_equals_the_integral_of_the_difference() -> None:
    """The sums of squares in the estimate against a plain D^-1 integral by a finer rule.

    Straight-sided T6: both rules are exact, so they agree to rounding.
    """
    mesh = grid("T6", 5, 4, shape=warp, straight=True)
    model = build_model(plate_job(youngs_modulus=E, poissons_ratio=NU, thickness=T), mesh)
    u = np.random.default_rng(4).random((mesh.node_count, 2, 1))
    recovery = Recovery.build(model)
    nodal = recovery.nodal_stress(u)
    nothing = Exact(lambda x, y: np.zeros((*x.shape, 2)), lambda x, y: np.zeros((*x.shape, 3)))
    plain = measure_errors(model, nothing, u, nodal, recovery.field_mesh.connectivity)
    estimate = estimate_error(recovery, u, nodal)
    assert estimate.energy_norm[0] == pytest.approx(plain.estimate, rel=1e-10)
    assert estimate.strain[0] == pytest.approx(plain.raw**2, rel=1e-10)


@pytest.mark.parametrize("kind", ELEMENTS)
def test_constant_stress_has_no_error(kind: str) -> None:
    model = square(kind, 3)
    u = np.zeros((model.mesh.node_count, 2, 1))
    u[:, 0, 0] = 1e-3 * model.mesh.nodes[:, 0]
    recovery = Recovery.build(model)
    assert estimate_error(recovery, u, recovery.nodal_stress(u)).relative[0] < 1e-9


@pytest.mark.parametrize("kind", ["T3", "Q8"])
def test_free_expansion_has_no_relative_error(kind: str) -> None:
    """Stress and error are both rounding; their ratio would say nothing."""
    model = square(kind, 4)
    x, y = model.mesh.nodes.T
    u = 1.2e-5 * 80 * np.stack([x, y], axis=1)[..., None]
    heat = (np.full((model.mesh.element_count, 1), 80.0),)
    recovery = Recovery.build(model)
    estimate = estimate_error(recovery, u, recovery.nodal_stress(u, heat), heat)
    assert estimate.relative[0] == 0


@pytest.mark.parametrize("kind", ELEMENTS + MIXED)
def test_a_change_of_thickness_is_no_error(kind: str) -> None:
    """A bar of two thicknesses in tension: 50 and 25 by hand, exactly, if nothing contracts."""
    mesh = grid(
        kind, 6, 3, size=(6.0, 3.0), region_of_column=[0, 0, 0, 1, 1, 1], regions=(PLATE, "pad")
    )
    job = plate_job(
        [Support("wall", Named("left"), ux=0.0), Support("pin", Named("SW"), uy=0.0)],
        [TotalForce(on=Named("right"), force=(300.0, 0.0))],
        poissons_ratio=0.0,
        thickness=2.0,
        regions=(Region("pad", thickness=4.0),),
    )
    solution = solve(job, mesh)
    recovery = Recovery.build(solution.model)
    nodal = recovery.nodal_stress(solution.displacement)
    expected = np.where(recovery.field_mesh.region == 0, 50.0, 25.0)
    np.testing.assert_allclose(nodal[:, 0, 0], expected, rtol=1e-9)
    assert estimate_error(recovery, solution.displacement, nodal).relative[0] < 1e-6


def test_no_load_has_no_error() -> None:
    model = square("Q4", 3)
    u = np.zeros((model.mesh.node_count, 2, 2))
    recovery = Recovery.build(model)
    assert (estimate_error(recovery, u, recovery.nodal_stress(u)).relative == 0).all()


def test_equivalent_error_stress_is_the_size_of_a_jump() -> None:
    """A recovered stress that is off by (s, 0, 0) everywhere is an error of s: E e^2 / V = s^2."""
    model = square("Q8", 3)
    u = np.zeros((model.mesh.node_count, 2, 1))
    recovery = Recovery.build(model)
    nodal = np.zeros((recovery.field_mesh.point_count, 3, 1))
    nodal[:, 0] = 17.0
    for stress in error_stress(model, estimate_error(recovery, u, nodal)):
        np.testing.assert_allclose(stress, 17.0, rtol=1e-12)


@pytest.mark.parametrize("kind", ELEMENTS)
def test_volumes_add_up_to_the_plate(kind: str) -> None:
    """3 x 2 with thickness 2, inner nodes moved."""
    mesh = grid(kind, 4, 3, size=(3.0, 2.0), shape=_bubble)
    model = build_model(plate_job(thickness=T), mesh)
    assert sum(v.sum() for v in model.volumes) == pytest.approx(12.0, rel=1e-12)


def _bubble(x: np.ndarray, y: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    bubble = np.sin(np.pi * x / 3) * np.sin(np.pi * y / 2)
    return x + 0.1 * bubble, y - 0.1 * bubble
