"""Nothing accepted is lost: jobs of four clients while everything is killed, wiped and filled.

CHAOS_SEED=7    another order of events
CHAOS_JOBS=3000 a longer run; what happens, happens more often
CHAOS_DISK=mount | limit   how the disk is filled; a mounted file system where that is allowed
"""

import json
import os
import random
import time
from collections import Counter
from pathlib import Path

import pytest

from tests.chaos_clients import (
    TROUBLE,
    Watched,
    check_results,
    read_on,
    submit_all,
    walk_pages,
)
from tests.chaos_site import MUST, Site, running_site
from tests.service_pool import eventually, final_events
from workers.record import DISK, KILLED, Record
from workers.settings import Settings
from workers.store import Store

pytestmark = [pytest.mark.server, pytest.mark.slow]

SEED = int(os.environ.get("CHAOS_SEED", "1"))
JOBS = int(os.environ.get("CHAOS_JOBS", "300"))
CLIENTS = 4
PATIENCE = 240.0  # for all jobs to end once nothing is killed any more [s]
ROUNDS = max(1, JOBS // 300)
PAUSE = 0.25  # of a client after a job, on the average [s]


def test_whatever_is_killed_every_accepted_job_ends_once_and_right(tmp_path: Path) -> None:
    settings = Settings(
        store=tmp_path / "disk" / "store",
        workers=2,
        pictures=0,
        time_limit=60,
        memory_limit=1024**3,
        reconcile_every=1.0,
        shutdown_grace=5.0,
        log_level="warning",
    )
    began = time.monotonic()
    with running_site(tmp_path, settings, os.environ.get("CHAOS_DISK", "")) as site:
        watched = Watched(site.address)
        eventually(lambda: answers(watched), patience=PATIENCE)
        clients = watched.threads(submit_all, [
            ([*range(client, JOBS, CLIENTS)], random.Random(f"{SEED} client {client}"), PAUSE)
            for client in range(CLIENTS)
        ])  # fmt: skip
        readers = watched.threads(read_on, [random.Random(f"{SEED} reader {r}") for r in (1, 2)])
        let_happen(site, random.Random(SEED))
        calm = time.monotonic()
        for client in clients:
            while client.is_alive() and time.monotonic() < calm + PATIENCE:
                site.keep_up()
                client.join(0.1)
        store = Store(settings.store)
        while store.unfinished() and time.monotonic() < calm + PATIENCE:
            site.keep_up()
            time.sleep(0.1)
        watched.over.set()
        for reader in readers:
            reader.join()
        ended = Counter(how_it_ended(watched, store, number) for number in range(JOBS))
        watched.wrong += [about_stuck(store, job_id) for job_id in store.unfinished()]
        print(
            f"\nchaos, seed {SEED}: {len(watched.ids)} accepted; "
            + ", ".join(f"{count} {how}" for how, count in sorted(ended.items()))
            + f"; {watched.repeats} sent again, {watched.refused} refused at first (503); "
            f"{watched.reads} jobs and {watched.pages} lists read meanwhile; "
            f"disk: {site.disk.name}; killed: "
            + ", ".join(f"{what} {site.kills[what]}" for what in MUST)
            + f"; {calm - began:.0f} s of it, {time.monotonic() - began:.0f} s in all"
        )
        assert watched.wrong == []
        check_store(watched, store)
    assert site.kills["Redis and its data"] >= 2 * ROUNDS
    assert site.kills["disk full"] == ROUNDS
    assert all(site.kills[what] for what in MUST)
    assert ended["finished"] >= 0.9 * JOBS


def answers(watched: Watched) -> bool:
    try:
        return watched.ask("GET", "/health/ready")[0] == 200
    except TROUBLE:
        return False


def let_happen(site: Site, chance: random.Random) -> None:
    """Everything of MUST, in random order."""
    events = [what for what, times in MUST.items() for _ in range(times * ROUNDS)]
    chance.shuffle(events)
    for what in events:
        until = time.monotonic() + chance.uniform(0.2, 1.5)
        while time.monotonic() < until:
            site.keep_up()
            time.sleep(0.05)
        site.happen(what, chance)


def how_it_ended(watched: Watched, store: Store, number: int) -> str:
    """In a word or two; what is not as it must be is added to what is wrong."""
    record = store.record(watched.ids[number])
    try:
        check_end(watched, store, number, record)
    except AssertionError as error:
        watched.wrong.append(f"job {number}, {record.history}: {error}")
    return record.state if record.cause is None else f"{record.state} ({record.cause})"


def check_end(watched: Watched, store: Store, number: int, record: Record) -> None:
    """One final state, the last one, as the API tells it; results if and only if finished."""
    assert record.is_final
    assert final_events(record) == [record.history[-1]]
    assert record.cause in (None, KILLED, DISK), record.reason
    here, folder = f"/v1/jobs/{record.id}", store.jobs.path(record.id)
    status, body, _ = watched.ask("GET", here)
    assert (status, json.loads(body)["state"]) == (200, record.state)
    status, body, _ = watched.ask("GET", f"{here}/results")
    assert status == (200 if record.state == "finished" else 409)
    assert (folder / "results").is_dir() == (record.state == "finished")
    assert not (folder / "staging").exists()
    if status == 200:
        check_results(json.loads(body), number)


def about_stuck(store: Store, job_id: str) -> str:
    """What is known of a job that does not end."""
    files = [path.name for path in store.jobs.path(job_id).iterdir()]
    return f"unfinished: {store.record(job_id).history}, {files}"


def check_store(watched: Watched, store: Store) -> None:
    """As many jobs as there were keys; nothing on the way, nothing left over."""
    ids = set(watched.ids.values())
    assert len(ids) == JOBS
    assert walk_pages(watched, ids) == ids
    assert {path.name for path in (store.root / "jobs").glob("*/*")} == ids
    assert len(list((store.root / "keys").iterdir())) == JOBS
    assert store.unfinished() == ()
    assert store.length_of_line("default") == 0
