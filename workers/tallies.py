"""What has been counted since Redis was last empty: how jobs ended, and how long each stage took.

One Redis hash, so that all workers count together and any API process can tell. When Redis loses
its data the counts begin at zero; readers of counters (Prometheus) are made for that. Counting is
a convenience: a count that cannot be written is lost and nothing else.
"""

import logging
import time
from collections import defaultdict
from collections.abc import Mapping
from dataclasses import dataclass, field
from datetime import datetime

import redis
from rq.utils import decode_redis_hash

from workers.record import Record

KEY = "fishplate:tallies"
# Upper bounds of the classes of durations [s]: half a decade each.
BOUNDS = (0.1, 0.3, 1.0, 3.0, 10.0, 30.0, 100.0, 300.0, 1000.0)
WAITING = "waiting"  # from being accepted to the first attempt

log = logging.getLogger(__name__)


class Stopwatch:
    """Seconds that each stage of a job took."""

    def __init__(self) -> None:
        self.seconds: dict[str, float] = defaultdict(float)
        self._stage: str | None = None
        self._since = 0.0

    def enter(self, stage: str | None) -> None:
        """The stage has begun, and the one before it is over; None: all is over."""
        moment = time.monotonic()
        if self._stage is not None:
            self.seconds[self._stage] += moment - self._since
        self._stage, self._since = stage, moment


@dataclass
class Durations:
    """How many durations were counted in each class; the last class has no bound."""

    counts: list[int] = field(default_factory=lambda: [0] * (len(BOUNDS) + 1))
    total: float = 0.0  # [s]


class Tallies:
    """The counts of one installation."""

    def __init__(self, connection: redis.Redis) -> None:
        self._connection = connection

    def add_end(self, record: Record, seconds: Mapping[str, float] | None = None) -> None:
        """Count a job that has come to its end, and the seconds of its stages where known."""
        try:
            with self._connection.pipeline() as pipeline:
                pipeline.hincrby(KEY, f"ended:{record.state}:{record.cause or ''}", 1)
                for stage, took in {**(seconds or {}), **_waited(record)}.items():
                    pipeline.hincrby(KEY, f"stage:{stage}:{_class_of(took)}", 1)
                    pipeline.hincrbyfloat(KEY, f"stage:{stage}:sum", took)
                pipeline.execute()
        except redis.RedisError as error:
            log.info("the end of job %s is not counted: %s", record.id, error)

    def ended(self) -> dict[tuple[str, str], int]:
        """Number of jobs by final state and cause."""
        found = self._read("ended")
        return {(state, cause): int(count) for (state, cause), count in found.items()}

    def stages(self) -> dict[str, Durations]:
        """Durations by stage."""
        stages: dict[str, Durations] = defaultdict(Durations)
        for (stage, part), value in self._read("stage").items():
            if part == "sum":
                stages[stage].total = float(value)
            else:
                stages[stage].counts[int(part)] = int(value)
        return stages

    def _read(self, kind: str) -> dict[tuple[str, str], str]:
        found = decode_redis_hash(self._connection.hgetall(KEY), decode_values=True)
        entries = ((name.split(":", 2), value) for name, value in found.items())
        return {(first, last): value for (k, first, last), value in entries if k == kind}


def _class_of(seconds: float) -> int:
    return sum(seconds > bound for bound in BOUNDS)


def _waited(record: Record) -> dict[str, float]:
    first = next((event.at for event in record.history if event.state == "running"), None)
    if first is None:
        return {}
    began, accepted = (datetime.fromisoformat(moment) for moment in (first, record.accepted))
    return {WAITING: max(0.0, (began - accepted).total_seconds())}
