"""Where the worst of many values is."""

import numpy as np
import pytest

from workers.analysis.peaks import ROWS_AT_ONCE, worst


@pytest.mark.parametrize("rows", [1, ROWS_AT_ONCE - 1, ROWS_AT_ONCE, 3 * ROWS_AT_ONCE + 7])
@pytest.mark.parametrize("columns", [1, 40])
def test_worst_is_what_numpy_says_for_every_column(rows: int, columns: int) -> None:
    """Whole numbers from a few, so that most are there many times: the first one counts."""
    values = np.random.default_rng(rows).integers(-9, 9, (rows, columns)).astype(float)
    assert np.array_equal(worst(values, 1), values.argmax(axis=0))
    assert np.array_equal(worst(values, -1), values.argmin(axis=0))


def test_infinities_and_what_is_not_a_number_are_found_as_numpy_finds_them() -> None:
    values = np.random.default_rng(0).standard_normal((2 * ROWS_AT_ONCE + 5, 3))
    values[300, 0], values[10, 1], values[500, 2] = np.nan, np.inf, -np.inf
    assert np.array_equal(worst(values, 1), values.argmax(axis=0))
    assert np.array_equal(worst(values, -1), values.argmin(axis=0))
