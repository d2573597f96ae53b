"""The server seen from outside, in the Prometheus text format.

Everything is read from the store and from Redis when somebody asks, nothing is counted in a process
of the API: so it does not matter how many there are, and which of them answers. Whoever may look
at jobs may look here; no name of any job, workspace or person is in it.
"""

from collections.abc import Iterator
from datetime import UTC, datetime
from importlib.metadata import version

import redis
from flask import Response
from prometheus_client import CONTENT_TYPE_LATEST, CollectorRegistry, generate_latest
from prometheus_client.core import (
    CounterMetricFamily,
    GaugeMetricFamily,
    HistogramMetricFamily,
    InfoMetricFamily,
)
from prometheus_client.metrics_core import Metric
from prometheus_client.registry import Collector

from api.openapi import Blueprint, problems_of
from api.responses import ABOUT_CAUTIONS, described_by
from api.services import services
from workers.backup import last_back_up
from workers.housekeeping import usage_of
from workers.queue import Queue
from workers.record import QUEUED, STATES, age_of
from workers.store import Store
from workers.tallies import BOUNDS, Durations

blueprint = Blueprint("metrics", __name__, description="For whoever watches over the server")

TEXT = {
    "description": "One sample a line",
    "headers": {
        "Link": {
            "description": 'rel="describedby": the cautions that hold for every answer',
            "schema": {"type": "string"},
        }
    },
    "content": {"text/plain": {"schema": {"type": "string"}}},
}


@blueprint.get("/metrics")
@blueprint.doc(responses={200: TEXT, **problems_of(503)})
def show() -> Response:
    """Measures of the server, in the Prometheus text format

    Jobs by state, length of the lines, age of the oldest waiting job, durations by stage, ends by
    cause, workers alive, size of the store, age of the last back-up. While Redis is away
    `fishplate_redis_up` is 0 and what only Redis knows is left out.
    """
    registry = CollectorRegistry(auto_describe=False)
    registry.register(Measures())
    answer = Response(generate_latest(registry), content_type=CONTENT_TYPE_LATEST)
    answer.headers["Link"] = described_by(ABOUT_CAUTIONS)
    return answer


class Measures(Collector):
    """What is measured, each time anew."""

    def collect(self) -> Iterator[Metric]:
        yield InfoMetricFamily("fishplate", "The program", value={"version": version("fishplate")})
        yield from _of_store(services().store)
        up = GaugeMetricFamily("fishplate_redis_up", "Whether Redis answers")
        try:
            measures = [*_of_queue(services().queue), *_of_work(services().queue)]
        except redis.RedisError:
            measures = []
        up.add_metric([], bool(measures))
        yield up
        yield from measures


def _of_store(store: Store) -> Iterator[Metric]:
    jobs = GaugeMetricFamily("fishplate_jobs", "Jobs in the store", labels=["state"])
    for state in STATES:
        jobs.add_metric([state], store.indexes.of_state(state).count())
    yield jobs
    oldest = store.indexes.of_state(QUEUED).oldest()
    yield GaugeMetricFamily(
        "fishplate_oldest_waiting_seconds",
        "Age of the job that has waited longest; 0 when none waits",
        value=0.0 if oldest is None else age_of(oldest),
    )
    yield GaugeMetricFamily(
        "fishplate_store_free_bytes",
        "Room left on the disk of the store",
        value=store.room_left(),
    )
    if usage := usage_of(store.root):
        yield GaugeMetricFamily(
            "fishplate_store_bytes",
            "Room that the jobs take, when it was looked at last",
            value=usage.bytes,
        )
    if at := last_back_up(store.root):
        yield GaugeMetricFamily(
            "fishplate_backup_age_seconds",
            "Time since the last back-up in which nothing was missing began",
            value=(datetime.now(UTC) - datetime.fromisoformat(at)).total_seconds(),
        )


def _of_queue(queue: Queue) -> Iterator[Metric]:
    depth = GaugeMetricFamily("fishplate_queue_depth", "Entries in line", labels=["line"])
    for line, count in queue.depths().items():
        depth.add_metric([line], count)
    yield depth
    yield GaugeMetricFamily(
        "fishplate_workers_alive",
        "Workers, on all machines, that have reported lately",
        value=queue.workers_alive(),
    )


def _of_work(queue: Queue) -> Iterator[Metric]:
    ended = CounterMetricFamily(
        "fishplate_jobs_ended",
        "Jobs that came to their end since Redis was last empty; failed ones by cause",
        labels=["state", "cause"],
    )
    for (state, cause), count in sorted(queue.tallies.ended().items()):
        ended.add_metric([state, cause], count)
    yield ended
    stages = HistogramMetricFamily(
        "fishplate_stage_seconds",
        "Time that jobs spent in each stage, and waiting for the first",
        labels=["stage"],
    )
    for stage, durations in sorted(queue.tallies.stages().items()):
        stages.add_metric([stage], _cumulated(durations), durations.total)
    yield stages


def _cumulated(durations: Durations) -> list[tuple[str, float]]:
    """Number of durations up to each bound, as Prometheus wants them."""
    bounds = (*map(str, BOUNDS), "+Inf")
    return [(bound, sum(durations.counts[: i + 1])) for i, bound in enumerate(bounds)]
