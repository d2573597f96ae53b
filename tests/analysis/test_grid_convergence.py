"""Series made from a formula: what they tend to and how fast is known."""

import numpy as np
import pytest

from workers.analysis.grid_convergence import grid_convergence


def series(order: float, sizes: list[float], limit: float = 3.0, scale: float = -0.5):
    return [limit + scale * h**order for h in sizes]


@pytest.mark.parametrize("order", [0.7, 1.0, 1.9])
@pytest.mark.parametrize("sizes", [[4.0, 2.0, 1.0], [1.0, 0.7, 0.5], [1.0, 0.8, 0.3]])
def test_order_and_limit_of_a_power_law_are_found(order: float, sizes: list[float]) -> None:
    found = grid_convergence(series(order, sizes), sizes, 2.0)
    assert found.behaviour == "converging"
    assert found.order == pytest.approx(order, rel=1e-6)
    assert found.extrapolated == pytest.approx(3.0, rel=1e-9)


def test_index_by_hand() -> None:
    """Roache 1994: 1.25 |f1 - f2| / (r^p - 1) with f = 1, 2, 2.5 and r = 2: p = 1, 0.625."""
    found = grid_convergence([1.0, 2.0, 2.5], [4.0, 2.0, 1.0], 2.0)
    assert found.order == pytest.approx(1.0)
    assert found.extrapolated == pytest.approx(3.0)
    assert found.uncertainty == pytest.approx(0.625)


def test_an_order_above_the_highest_counts_as_that() -> None:
    """f = 0, 0.9, 1: ratio 9 with r = 2 is more than 2^2; with p = 2 a third of 0.1 is to come."""
    found = grid_convergence([0.0, 0.9, 1.0], [4.0, 2.0, 1.0], 2.0)
    assert found.order == 2.0
    assert found.extrapolated == pytest.approx(1 + 0.1 / 3)


def test_a_power_of_the_size_grows() -> None:
    """r^(-0.4555): what a crack of 270 degrees does to the stress on finer and finer meshes."""
    sizes = [1.0, 0.5, 0.25]
    found = grid_convergence([h**-0.4555 for h in sizes], sizes, 2.0)
    assert (found.behaviour, found.order, found.uncertainty) == ("growing", None, None)


def test_slow_changes_of_a_finite_value_do_not_count_as_growth() -> None:
    found = grid_convergence([3.0, 3.02, 3.04], [4.0, 2.0, 1.0], 2.0)
    assert found.behaviour == "unresolved"
    assert found.uncertainty == pytest.approx(0.06)


@pytest.mark.parametrize(
    ("values", "sizes", "behaviour"),
    [
        ([1.0, 2.0, 1.5], [4.0, 2.0, 1.0], "oscillating"),
        ([1.0, 2.0, 2.5], [2.1, 2.0, 1.0], "unresolved"),
        ([2.0, 2.5], [2.0, 1.0], "unresolved"),
    ],
)
def test_without_an_order_three_times_the_last_change_is_uncertain(
    values: list[float], sizes: list[float], behaviour: str
) -> None:
    found = grid_convergence(values, sizes, 2.0)
    assert (found.behaviour, found.order, found.extrapolated) == (behaviour, None, None)
    assert found.uncertainty == pytest.approx(3 * abs(values[-1] - values[-2]))


def test_one_mesh_says_nothing() -> None:
    found = grid_convergence([2.0], [1.0], 2.0)
    assert (found.behaviour, found.uncertainty) == ("unresolved", None)


def test_values_that_no_longer_change_have_converged() -> None:
    found = grid_convergence(list(2.0 + 1e-12 * np.arange(3)), [4.0, 2.0, 1.0], 2.0)
    assert (found.behaviour, found.uncertainty) == ("converging", 0.0)


def test_changes_that_begin_late_have_no_order() -> None:
    found = grid_convergence([2.0, 2.0, 2.5], [4.0, 2.0, 1.0], 2.0)
    assert (found.behaviour, found.order) == ("unresolved", None)
    assert found.uncertainty == pytest.approx(1.5)


def test_rounding_of_larger_values_is_no_change() -> None:
    """A stress that vanishes beside one of 100."""
    found = grid_convergence([3e-14, -2e-14, 0.0], [4.0, 2.0, 1.0], 2.0, scale=100.0)
    assert (found.behaviour, found.uncertainty) == ("converging", 0.0)
