"""Pools of several machines on one store: a real Redis; the host names are made up."""

import socket
import threading
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import pytest

from workers import neighbours
from workers.errors import StoreError
from workers.neighbours import BEAT, present, require_locks
from workers.queue import Queue


@pytest.fixture(autouse=True)
def _quick(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(neighbours, "LOOK", 0.01)
    monkeypatch.setattr(neighbours, "KEPT", 1)


@contextmanager
def pool_on(host: str, root: Path, queue: Queue, patch: pytest.MonkeyPatch) -> Iterator[None]:
    with patch.context() as named:
        named.setattr(socket, "gethostname", lambda: host)
        entered = present(root, queue.connection)
        presence = entered.__enter__()
    presence.beat()
    try:
        yield
    finally:
        entered.__exit__(None, None, None)


def test_a_pool_whose_lock_is_seen_is_a_neighbour(
    queue: Queue, monkeypatch: pytest.MonkeyPatch
) -> None:
    root = queue.store.root
    (root / "pools").mkdir(parents=True)
    (root / "pools" / "shed.0").touch()  # left by a pool that was killed
    with pool_on("shed", root, queue, monkeypatch), pool_on("yard", root, queue, monkeypatch):
        require_locks(root, queue.connection)
    assert list((root / "pools").iterdir()) == []
    assert not queue.connection.keys(f"{BEAT}*")


def test_a_pool_that_beats_without_a_lock_shows_that_locks_do_not_travel(
    queue: Queue, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Also when the folders are not the same one."""
    elsewhere, over = tmp_path / "elsewhere", threading.Event()

    def go_on() -> None:
        while not over.wait(0.05):
            for key in queue.connection.keys(f"{BEAT}shed.*"):
                queue.connection.incr(key)

    heart = threading.Thread(target=go_on)
    with pool_on("shed", elsewhere, queue, monkeypatch):
        heart.start()
        with pytest.raises(StoreError, match="the pool on shed works with the same queue"):
            require_locks(queue.store.root, queue.connection)
        over.set()
        heart.join()


def test_a_pool_that_was_killed_is_waited_for(queue: Queue) -> None:
    """Its lock has gone with it, its beat stays for a while."""
    queue.connection.set(f"{BEAT}shed.0", 7, px=200)
    require_locks(queue.store.root, queue.connection)
    assert not queue.connection.exists(f"{BEAT}shed.0")


def test_waiting_ends_when_the_pool_is_to_stop(queue: Queue) -> None:
    queue.connection.set(f"{BEAT}shed.0", 7)
    require_locks(queue.store.root, queue.connection, stop=lambda: True)


def test_pools_of_the_same_machine_need_no_proof(queue: Queue) -> None:
    queue.connection.set(f"{BEAT}{socket.gethostname()}.0", 7)
    require_locks(queue.store.root, queue.connection)
