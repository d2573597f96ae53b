"""Reactions and equilibrium against statics by hand."""

import numpy as np
import pytest

from tests.plates import ELEMENTS, grid, plate_job, warp
from workers.analysis.resultants import centroid, equilibrium, imbalance, reactions
from workers.analysis.solution import solve
from workers.job import (
    Acceleration,
    Named,
    PointForce,
    Spring,
    Support,
    TemperatureChange,
    TotalForce,
)

PIN = Support("pin", Named("SW"), ux=0.0, uy=0.0)
ROLLER = Support("roller", Named("SE"), uy=0.0)
SIZE = (4.0, 1.0)


@pytest.mark.parametrize("kind", ELEMENTS)
def test_beam_on_two_supports_shares_the_load_by_the_lever_rule(kind: str) -> None:
    """12 down at the top right corner (x = 4) and 8 to the left: all by moments about the pin."""
    job = plate_job([PIN, ROLLER], [PointForce(on=Named("NE"), force=(-8.0, -12.0))])
    pin, roller = reactions(solve(job, grid(kind, 8, 2, size=SIZE)))
    # About the pin: roller 4 - 12 * 4 + 8 * 1 = 0.
    np.testing.assert_allclose(roller.resultant.ravel(), [0, 10, 0], atol=1e-8)
    np.testing.assert_allclose(pin.resultant.ravel(), [8, 2, 0], atol=1e-8)
    assert pin.about.tolist() == [0, 0]


@pytest.mark.parametrize("kind", ELEMENTS)
def test_clamped_side_takes_force_and_moment(kind: str) -> None:
    """About the middle of the side at x = 0; 5 down at x = 4 turns clockwise by 20."""
    clamp = Support("clamp", Named("left"), ux=0.0, uy=0.0)
    job = plate_job([clamp], [TotalForce(on=Named("right"), force=(3.0, -5.0))])
    (reaction,) = reactions(solve(job, grid(kind, 6, 2, size=SIZE)))
    np.testing.assert_allclose(reaction.about, [0, 0.5], atol=1e-12)
    np.testing.assert_allclose(reaction.resultant.ravel(), [-3, 5, 20], atol=1e-8)


def test_springs_are_part_of_their_support() -> None:
    bed = Support("bed", Named("bottom"), spring=Spring(x=1e3, y=1e3))
    mesh = grid("Q8", 4, 2, size=SIZE)
    job = plate_job([bed], [Acceleration(acceleration=(0.0, -9810.0))])
    solution = solve(job, mesh)
    (reaction,) = reactions(solution)
    weight = 7.85e-9 * 9810 * 4 * 1 * 2
    np.testing.assert_allclose(reaction.resultant.ravel(), [0, weight, 0], atol=1e-9 * weight)


@pytest.mark.parametrize("kind", ELEMENTS)
def test_loads_and_reactions_balance_about_the_centroid(kind: str) -> None:
    mesh = grid(kind, 8, 3, shape=warp)
    job = plate_job([PIN, ROLLER], [TotalForce(on=Named("top"), force=(30.0, -50.0))])
    balance = equilibrium(solve(job, mesh))
    np.testing.assert_allclose(balance.applied[:2, 0], [30, -50], rtol=1e-12)
    np.testing.assert_allclose(balance.reaction, -balance.applied, atol=1e-9)
    assert imbalance(balance.applied, balance.reaction, balance.size)[0] < 1e-9


@pytest.mark.parametrize(
    ("supports", "loads"),
    [
        ([PIN, ROLLER], [TemperatureChange(change=40.0)]),
        ([PIN, Support("roller", Named("SE"), uy=0.3)], []),
    ],
    ids=["free heating", "settlement"],
)
def test_rounding_alone_is_no_imbalance(supports: list, loads: list) -> None:
    """Statically determinate plates follow heat and settlement without any force."""
    balance = equilibrium(solve(plate_job(supports, loads), grid("T6", 6, 3, size=SIZE)))
    assert imbalance(balance.applied, balance.reaction, balance.size)[0] < 1e-9


def test_missing_force_shows_as_imbalance() -> None:
    """A tenth of one of two forces of 10 missing: 1 in 20."""
    applied, reaction = np.array([[10.0], [0], [0]]), np.array([[-9.0], [0], [0]])
    assert imbalance(applied, reaction, np.array([[20.0], [1.0]])) == pytest.approx(0.05)
    nothing = np.zeros((3, 1))
    assert imbalance(nothing, nothing, np.zeros((2, 1))) == 0


@pytest.mark.parametrize("kind", ELEMENTS)
def test_centroid_of_a_trapezium(kind: str) -> None:
    """Parallel sides 2 (at y = 0) and 1, height 1: y = h (a + 2 b) / (3 (a + b)) = 4/9."""
    mesh = grid(kind, 4, 3, shape=lambda x, y: (2 * x * (1 - y / 2) + y / 2, y))
    np.testing.assert_allclose(centroid(mesh), [1.0, 4 / 9], rtol=1e-12)
