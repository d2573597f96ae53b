"""Limits hold inside their block, and only there."""

import resource
import time
from contextlib import suppress

import numpy as np
import pytest

from workers.limits import TimeLimitError, memory_limit, time_limit

MEBIBYTE = 1024**2


def sleep_and_swallow_errors(seconds: float) -> None:
    """What a careless library does with an error that comes in between."""
    until = time.monotonic() + seconds
    while time.monotonic() < until:
        with suppress(Exception):
            time.sleep(0.05)


def test_a_block_over_its_time_is_left_whatever_it_swallows() -> None:
    began = time.monotonic()
    with pytest.raises(TimeLimitError) as caught, time_limit(1):
        sleep_and_swallow_errors(20.0)
    assert time.monotonic() - began < 10.0
    assert caught.value.seconds == 1


def test_after_a_block_its_time_does_not_matter() -> None:
    with time_limit(1):
        pass
    time.sleep(1.2)


def test_a_block_over_its_memory_gets_a_memory_error_and_the_next_one_not() -> None:
    before = resource.getrlimit(resource.RLIMIT_AS)
    with pytest.raises(MemoryError), memory_limit(64 * MEBIBYTE):
        np.ones(128 * MEBIBYTE // 8)
    assert resource.getrlimit(resource.RLIMIT_AS) == before
    assert np.ones(128 * MEBIBYTE // 8).sum() == 128 * MEBIBYTE // 8


def test_a_block_within_its_memory_is_not_disturbed() -> None:
    with memory_limit(256 * MEBIBYTE):
        assert np.ones(64 * MEBIBYTE // 8)[-1] == 1.0
