"""Load cases and combinations as columns of factors."""

from dataclasses import replace

import numpy as np
import pytest

from tests.plates import plate_job
from workers.analysis.combine import (
    States,
    factors_of,
    load_states,
    superpose,
    superpose_blocks,
)
from workers.job import BodyForce, Combination, Job


@pytest.fixture
def states() -> States:
    load = [BodyForce(force=(1.0, 0.0))]
    job = plate_job(
        (),
        {"lift": load, "wind": load, "self weight": load},
        combinations=(
            Combination("both", {"wind": -1.5, "lift": 2.0}),
            Combination("weight", {"self weight": 1.35}),
        ),
    )
    return load_states(job)


def test_cases_come_first_each_on_its_own(states: States) -> None:
    assert states.names == ("lift", "wind", "self weight", "both", "weight")
    assert states.kinds == ("case", "case", "case", "combination", "combination")
    assert (states.factors[:, :3] == np.eye(3)).all()


def test_factors_stand_where_their_cases_do(states: States) -> None:
    assert states.factors[:, 3].tolist() == [2.0, -1.5, 0.0]
    assert states.factors[:, states.index("weight")].tolist() == [0.0, 0.0, 1.35]


def test_unknown_state_is_named_with_those_there_are(states: States) -> None:
    with pytest.raises(KeyError, match=r"snow.*lift"):
        states.index("snow")


@pytest.mark.parametrize("columns", [range(0, 2), range(1, 4), range(3, 5), range(5)])
def test_superposition_is_the_sum_by_hand(states: States, columns: range) -> None:
    values = np.random.default_rng(0).random((4, 2, 3))
    result = superpose(values, states, columns)
    for k, column in enumerate(columns):
        by_hand = sum(values[..., c] * states.factors[c, column] for c in range(3))
        np.testing.assert_allclose(result[..., k], by_hand, rtol=1e-14)


def test_superposed_cases_are_copies(states: States) -> None:
    """Who changes a state must not change the solution."""
    values = np.ones((2, 3))
    superpose(values, states, range(0, 2))[:] = 0
    assert (values == 1).all()


def test_blocks_are_superposed_one_by_one(states: States) -> None:
    blocks = (np.ones((2, 3)), np.full((1, 3), 2.0))
    first, second = superpose_blocks(blocks, states, range(3, 4)) or ((), ())
    np.testing.assert_allclose(first, 0.5)
    np.testing.assert_allclose(second, 1.0)
    assert superpose_blocks(None, states, range(3, 4)) is None


@pytest.mark.parametrize("size", [1, 2, 5, 9])
def test_chunks_cover_all_states_once(states: States, size: int) -> None:
    assert [column for chunk in states.chunks(size) for column in chunk] == [0, 1, 2, 3, 4]


# --- cases made of factors -----------------------------------------------------------------------


@pytest.fixture
def factored() -> Job:
    load = [BodyForce(force=(1.0, 0.0))]
    job = plate_job((), {"x": load, "y": load})
    return replace(
        job,
        cases=(Combination("rope 1", {"x": 0.8, "y": 0.6}), Combination("y", {"x": 3.0})),
        combinations=(Combination("both", {"y": 2.0, "rope 1": 10.0}),),
    )


def test_cases_made_of_factors_take_the_place_of_the_load_cases(factored: Job) -> None:
    states = load_states(factored)
    assert states.names == ("rope 1", "y", "both")
    assert states.kinds == ("case", "case", "combination")
    # both = 2 (3 x) + 10 (0.8 x + 0.6 y) = 14 x + 6 y
    np.testing.assert_allclose(states.factors, [[0.8, 3.0, 14.0], [0.6, 0.0, 6.0]], rtol=1e-15)


@pytest.mark.parametrize("columns", [range(0, 1), range(1, 2), range(0, 2), range(3)])
def test_superposition_of_factored_cases_by_hand(factored: Job, columns: range) -> None:
    values = np.random.default_rng(0).random((4, 2, 2))
    x, y = values[..., 0], values[..., 1]
    by_hand = np.stack((0.8 * x + 0.6 * y, 3 * x, 14 * x + 6 * y), axis=-1)
    result = superpose(values, load_states(factored), columns)
    np.testing.assert_allclose(result, by_hand[..., columns.start : columns.stop], rtol=1e-14)


def test_factors_of_a_state_by_load_case(factored: Job) -> None:
    assert factors_of(factored, "rope 1") == {"x": 0.8, "y": 0.6}
    assert factors_of(factored, "both") == {"x": 14.0, "y": 6.0}
    with pytest.raises(KeyError):
        factors_of(factored, "x")  # a pattern only
