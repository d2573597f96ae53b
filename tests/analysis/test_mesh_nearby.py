"""Points that coincide and segments that come near each other, against a search tree."""

import numpy as np
import pytest
from scipy.spatial import cKDTree

from workers.analysis.nearby import ACROSS, SKEW, close_pairs, segment_candidates


@pytest.mark.parametrize("tolerance", [0.0, 0.01, 0.05])
def test_close_pairs_are_those_of_a_search_tree(tolerance: float) -> None:
    """scipy.spatial.cKDTree as a general reference library."""
    rng = np.random.default_rng(1)
    points = rng.random((600, 2))
    points[500:] = points[:100] + rng.uniform(-0.02, 0.02, (100, 2)) * (tolerance > 0)
    found = close_pairs(points, tolerance)
    expected = cKDTree(points).query_pairs(tolerance, output_type="ndarray")
    assert found.tolist() == sorted(expected.tolist())
    assert len(found)


def test_close_pairs_on_a_grid_finds_none() -> None:
    x, y = np.meshgrid(np.arange(50.0), np.arange(50.0))
    assert not len(close_pairs(np.column_stack((x.ravel(), y.ravel())), 1e-6))


def test_close_pairs_stops_when_enough_are_found() -> None:
    """Ten thousand points in one place are fifty million pairs; no one needs them all."""
    assert 50 <= len(close_pairs(np.zeros((10_000, 2)), 1e-6, most=50)) < 20_000


@pytest.mark.parametrize("chunk", [1, 100, 10**6])
def test_candidates_are_all_pairs_with_overlapping_boxes(
    chunk: int, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Every pair once, against a comparison of each with each."""
    monkeypatch.setattr("workers.analysis.nearby.CHUNK", chunk)
    rng = np.random.default_rng(2)
    start = rng.random((200, 2))
    end = start + rng.normal(0, 0.05, (200, 2))
    found = np.sort(np.concatenate(list(segment_candidates(start, end, 0.01))), axis=1)
    overlap = np.ones((200, 200), bool)
    for direction in (SKEW, ACROSS):
        a, b = start @ direction, end @ direction
        low, high = np.minimum(a, b), np.maximum(a, b)
        overlap &= (low[:, None] <= high + 0.01) & (low <= high[:, None] + 0.01)
    assert sorted(found.tolist()) == np.argwhere(np.triu(overlap, 1)).tolist()
