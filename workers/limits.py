"""How long and how large the work on one job may become."""

import resource
import signal
from collections.abc import Iterator
from contextlib import contextmanager
from types import FrameType
from typing import NoReturn

import psutil


class TimeLimitError(BaseException):
    """The time is up. Not an Exception, so that no library on the way swallows it."""

    def __init__(self, seconds: int) -> None:
        self.seconds = seconds
        super().__init__(f"more than {seconds} s")


@contextmanager
def time_limit(seconds: int) -> Iterator[None]:
    """Raise TimeLimitError in the block when it takes longer (main thread only).

    Python raises it between two of its own steps: a call into compiled code is finished first. The
    worker outside kills a process that does not end for that reason.
    """

    def ring(_number: int, _frame: FrameType | None) -> NoReturn:
        raise TimeLimitError(seconds)

    before = signal.signal(signal.SIGALRM, ring)
    signal.alarm(seconds)
    try:
        yield
    finally:
        signal.alarm(0)
        signal.signal(signal.SIGALRM, before)


def address_space() -> int:
    """What this process has now [bytes]."""
    return int(psutil.Process().memory_info().vms)


@contextmanager
def memory_limit(amount: int, above: int | None = None) -> Iterator[None]:
    """Let the block take `amount` bytes of address space beyond what the process has now.

    above : count from this address space instead, as `address_space` gave it earlier.

    Beyond that an allocation fails: numpy raises MemoryError.
    """
    before, hard = resource.getrlimit(resource.RLIMIT_AS)
    limit = (address_space() if above is None else above) + amount
    if hard != resource.RLIM_INFINITY:
        limit = min(limit, hard)
    resource.setrlimit(resource.RLIMIT_AS, (limit, hard))
    try:
        yield
    finally:
        resource.setrlimit(resource.RLIMIT_AS, (before, hard))
