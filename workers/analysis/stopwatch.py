"""Wall time by stage."""

import time
from collections.abc import Iterator
from contextlib import contextmanager


class Stopwatch:
    """Adds up the seconds spent in named stages."""

    def __init__(self) -> None:
        self.seconds: dict[str, float] = {}

    @contextmanager
    def __call__(self, stage: str) -> Iterator[None]:
        start = time.perf_counter()
        try:
            yield
        finally:
            elapsed = time.perf_counter() - start
            self.seconds[stage] = self.seconds.get(stage, 0.0) + elapsed
