"""The rule for sizes against a general optimiser, and what surrounds it."""

import numpy as np
import pytest
from scipy.optimize import minimize

from tests.plates import grid
from workers.analysis.error_estimate import ErrorEstimate
from workers.analysis.singularities import SingularPlace
from workers.analysis.sizes_wanted import LARGEST, SMALLEST, SizesWanted


def estimate(errors: np.ndarray, strain: float = 1.0) -> ErrorEstimate:
    """Squared errors (m, k) of one block."""
    states = errors.shape[1]
    return ErrorEstimate((errors,), np.full(states, strain), np.zeros(states))


def wanted(kind: str, *states: np.ndarray) -> SizesWanted:
    found = SizesWanted(grid(kind, 4, 2))
    for errors in states:
        found.include(estimate(errors[:, None]))
    return found


@pytest.mark.parametrize(("kind", "order"), [("Q4", 1), ("Q8", 2)])
def test_sizes_are_those_of_least_elements_for_the_error(kind: str, order: int) -> None:
    """min sum r^-2 subject to sum e^2 r^(2p) = eta^2 total, by SLSQP."""
    errors = np.random.default_rng(2).uniform(0.5, 2.0, 8) * 1e-3
    goal = 0.06
    allowed = goal**2 * (1.0 + errors.sum())
    best = minimize(
        lambda x: np.exp(-2 * x).sum(),
        np.zeros(8),
        constraints={
            "type": "eq",
            "fun": lambda x: (errors * np.exp(2 * order * x)).sum() / allowed - 1,
        },
        tol=1e-14,
    )
    np.testing.assert_allclose(wanted(kind, errors).ratios(goal), np.exp(best.x), rtol=1e-4)


def test_new_elements_share_the_error_equally() -> None:
    """r^-2 elements with together e^2 r^(2p): each has e^2 r^(2p + 2), the same for all."""
    errors = np.array([1.0, 2, 3, 4, 5, 6, 7, 8]) * 1e-4
    ratios = wanted("Q8", errors).ratios(0.05)
    np.testing.assert_allclose(np.ptp(errors * ratios**6), 0, atol=1e-12)


def test_the_smallest_size_that_any_state_asks_for_is_taken() -> None:
    left, right = np.full(8, 1e-6), np.full(8, 1e-6)
    left[:4], right[4:] = 1e-3, 1e-3
    alone = [wanted("Q8", state).ratios(0.03) for state in (left, right)]
    np.testing.assert_allclose(wanted("Q8", left, right).ratios(0.03), np.minimum(*alone))


def test_a_state_without_stress_asks_for_nothing() -> None:
    errors = np.full(8, 1e-4)
    nothing = ErrorEstimate((np.zeros((8, 1)),), np.zeros(1), np.zeros(1))
    found = wanted("Q8", errors)
    before = found.ratios(0.01)
    found.include(nothing)
    np.testing.assert_array_equal(found.ratios(0.01), before)


def test_one_step_changes_sizes_within_limits() -> None:
    errors = np.array([1e-30, 1e-30, 1e-30, 1e-30, 1e-30, 1e-30, 1e-30, 0.5])
    ratios = wanted("Q4", errors).ratios(1e-4)
    assert ratios.max() == LARGEST
    assert ratios.min() == SMALLEST


def test_a_corner_takes_a_power_more_than_its_elements() -> None:
    """Twice as fine elements of order 2 gain a factor of 4; r^0.5 needs 2^(2 / 0.5) = 16."""
    mesh = grid("Q8", 4, 2)
    found = SizesWanted(mesh)
    corner = SingularPlace("re-entrant-corner", 0, (0.0, 0.0), 0.5, 0.25, 0.1)
    ratios = np.full(8, 0.5)
    ((x, y, size),) = found.at_corners(ratios, [corner])
    cell = np.sqrt(0.25 * 0.5 / 0.75)  # a size is of an element of equal sides, see `size_field.py`
    assert (x, y) == (0.0, 0.0)
    assert size == pytest.approx(cell / 16)
