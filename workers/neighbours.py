"""Whether locks hold between machines: what every pool relies on when several share a store.

    pools/HOST.ID    a file in the store, locked by one pool as long as it lives

Redis knows the same pools, each with a beat. A pool of another machine whose beat goes on while
nobody holds its lock shows that locks do not travel (or that the folder is not shared at all):
then two machines would work on the same job, and each would take the other's work for abandoned.
"""

import logging
import secrets
import socket
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager, suppress
from pathlib import Path

import redis
from rq.utils import as_text

from workers import durable
from workers.errors import StoreError
from workers.store_reader import telling

BEAT = "fishplate:pool:"
EVERY = 5.0  # between two beats [s]
KEPT = 20  # the beat of a pool that was killed [s]
LOOK = 0.5  # between two looks whether a beat goes on [s]

log = logging.getLogger(__name__)


class Presence:
    """A pool that others can see."""

    def __init__(self, connection: redis.Redis, name: str) -> None:
        self._connection = connection
        self._name = name
        self._next_beat = 0.0

    def beat(self) -> None:
        """Tell Redis that we live, now and then; nothing comes of it while Redis is away."""
        if time.monotonic() < self._next_beat:
            return
        self._next_beat = time.monotonic() + EVERY
        with suppress(redis.RedisError), self._connection.pipeline() as pipeline:
            pipeline.incr(BEAT + self._name)
            pipeline.expire(BEAT + self._name, KEPT)
            pipeline.execute()

    def leave(self) -> None:
        with suppress(redis.RedisError):
            self._connection.delete(BEAT + self._name)


@contextmanager
def present(root: Path, connection: redis.Redis) -> Iterator[Presence]:
    """Be seen by other pools; yields what has to beat."""
    name = f"{socket.gethostname()}.{secrets.token_hex(8)}"
    path = root / "pools" / name
    with telling("the store cannot be locked"):
        durable.make_folder(path.parent)
        for left in path.parent.glob(f"{socket.gethostname()}.*"):  # by pools that were killed
            with durable.lock(left, wait=False) as mine:
                if mine:
                    left.unlink()
        lock = durable.lock(path)
    with lock:
        presence = Presence(connection, name)
        try:
            yield presence
        finally:
            presence.leave()  # first: a beat without a lock would be misunderstood
            path.unlink(missing_ok=True)


def require_locks(
    root: Path, connection: redis.Redis, stop: Callable[[], bool] = lambda: False
) -> None:
    """See whether the locks of other machines' pools are locked here.

    stop : asked now and then; True ends the wait for a pool that was killed lately

    Raises
    ------
    StoreError         they are not: this machine must not work on the store.
    redis.RedisError   try again later.
    """
    ours = f"{BEAT}{socket.gethostname()}."
    for key in map(as_text, connection.scan_iter(match=f"{BEAT}*")):
        name = key.removeprefix(BEAT)
        if key.startswith(ours) or _is_locked(root / "pools" / name):
            continue
        before = connection.get(key)
        while (beat := connection.get(key)) == before is not None and not stop():
            time.sleep(LOOK)  # killed, it has no lock either; its beat ends
        if beat not in (None, before) and not _is_locked(root / "pools" / name):
            host = name.rsplit(".", 1)[0]
            raise StoreError(
                f"the pool on {host} works with the same queue, but its lock is not seen in "
                f"{root / 'pools'}: both machines must share this folder, on a file system whose "
                "locks (flock) hold between machines, such as NFS 4"
            )


def _is_locked(path: Path) -> bool:
    if not path.exists():
        return False
    with telling("the store cannot be locked"), durable.lock(path, wait=False) as mine:
        return not mine
