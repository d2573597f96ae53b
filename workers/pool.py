"""The pool: keeps the workers of one machine alive and has the reconciler look round.

`run_pool` is the whole of `fishplate work`; `python -m workers.pool` is the same as a child of a
process that must not load the numerical stack, and ends with it.
"""

import importlib
import logging
import multiprocessing
import multiprocessing.connection
import multiprocessing.process
import os
import signal
import sys
import time
from collections.abc import Callable
from contextlib import nullcontext
from types import FrameType

import redis

from workers import layout, logs
from workers.errors import FishplateError, StoreError
from workers.housekeeping import keep_house
from workers.lineage import die_with_parent
from workers.neighbours import Presence, present, require_locks
from workers.private_redis import PrivateRedis
from workers.queue import Queue
from workers.reconcile import reconcile
from workers.settings import PREFIX, Settings
from workers.store import Store

TICK = 0.5  # longest time until a signal is noticed [s]
RESTART_PAUSE = 1.0  # between two starts of workers, so that a broken one does not spin [s]
SHORTEST_GRACE = 1.5  # rq takes a second signal within 1 s for the first one heard twice [s]
FIRST_TIDYING = 60.0  # after the start, when workers have begun [s]
LAST_WAIT = 10.0  # for workers that were told to stop at once [s]

STOP_SIGNALS = (signal.SIGTERM, signal.SIGINT)

# One thread for each worker: the machine is filled by working on several jobs at a time.
ONE_THREAD = {f"{library}_NUM_THREADS": "1" for library in ("OMP", "OPENBLAS", "MKL", "NUMEXPR")}

_fork = multiprocessing.get_context("fork")
log = logging.getLogger(__name__)


class Pool:
    """The workers of one machine."""

    def __init__(self, settings: Settings, server: PrivateRedis | None = None) -> None:
        self.settings = settings
        self.server = server
        self.store = Store(settings.store)
        self.queue = Queue(settings)
        self.workers: list[multiprocessing.process.BaseProcess] = []
        self._stopping = False
        self._next_start = self._next_look = 0.0
        self._next_tidying = time.monotonic() + min(FIRST_TIDYING, settings.housekeeping_every)
        self._tidying: multiprocessing.process.BaseProcess | None = None

    def run(self) -> None:
        """Work until SIGTERM or SIGINT; then let running jobs end, or hand them back."""
        for number in STOP_SIGNALS:
            signal.signal(number, self._request_stop)
        with present(self.store.root, self.queue.connection) as presence:
            self._work(presence)

    def _work(self, presence: Presence) -> None:
        try:
            self._look_for_neighbours(presence)
            self._replace_dead()
            self.store.reindex()  # reads every record: the workers need not wait for it
            while not self._stopping:
                presence.beat()
                self._keep_server_alive()
                self._replace_dead()
                self._reconcile()
                self._keep_house()
                multiprocessing.connection.wait([w.sentinel for w in self.workers], timeout=TICK)
        finally:
            self._stop()

    def _look_for_neighbours(self, presence: Presence) -> None:
        """Before anything is begun: on other machines the same locks must hold."""
        while not self._stopping:
            try:
                presence.beat()
                require_locks(self.store.root, self.queue.connection, lambda: self._stopping)
                return
            except redis.RedisError as error:  # without it no worker could begin either
                log.warning("the pool waits for Redis: %s", error)
                self._keep_server_alive()
                time.sleep(RESTART_PAUSE)

    def _request_stop(self, _number: int, _frame: FrameType | None) -> None:
        self._stopping = True

    def _keep_server_alive(self) -> None:
        if self.server is None:
            return
        try:
            self.server.keep_alive()
        except OSError as error:  # a full disk, most likely: the workers go on
            log.warning("redis-server cannot be started yet: %s", error)

    def _replace_dead(self) -> None:
        alive = [worker for worker in self.workers if worker.is_alive()]
        if len(alive) < len(self.workers):
            log.warning("%d workers ended unexpectedly", len(self.workers) - len(alive))
            self._next_look = 0.0  # their jobs should not wait for the timer
        self.workers = alive
        if len(alive) < self.settings.workers and time.monotonic() >= self._next_start:
            self._next_start = time.monotonic() + RESTART_PAUSE
            for _ in range(self.settings.workers - len(alive)):
                self.workers.append(_start(_be_worker, self.settings))

    def _reconcile(self) -> None:
        if time.monotonic() < self._next_look:
            return
        self._next_look = time.monotonic() + self.settings.reconcile_every
        try:
            reconcile(self.store, self.queue)
        except redis.RedisError as error:
            log.warning("the reconciler will try again: %s", error)
        except Exception:  # whatever is wrong with one look, the workers must go on
            log.exception("the reconciler will try again")

    def _keep_house(self) -> None:
        """In a process of its own: looking at a large store takes longer than a tick."""
        if self._tidying is not None and self._tidying.is_alive():
            return
        if time.monotonic() >= self._next_tidying:
            self._next_tidying = time.monotonic() + self.settings.housekeeping_every
            self._tidying = _start(_be_housekeeper, self.settings)

    def _stop(self) -> None:
        """First ask, then (rq takes a second signal so) insist, then kill."""
        if self._tidying is not None:
            self._tidying.kill()  # every step of it is whole, or is done again
            self._tidying.join()
        self._signal(signal.SIGTERM, max(self.settings.shutdown_grace, SHORTEST_GRACE))
        self._signal(signal.SIGTERM, LAST_WAIT)
        self._signal(signal.SIGKILL, LAST_WAIT)

    def _signal(self, number: signal.Signals, wait: float) -> None:
        for worker in self.workers:
            if worker.pid is not None and worker.is_alive():
                os.kill(worker.pid, number)
        until = time.monotonic() + wait
        for worker in self.workers:
            worker.join(max(0.0, until - time.monotonic()))


def _start(
    what: Callable[[Settings], None], settings: Settings
) -> multiprocessing.process.BaseProcess:
    """A child that does one thing and ends with us."""
    child = _fork.Process(target=_be_child, args=(what, settings, os.getpid()))
    # A signal must not meet a child that still has our handlers.
    signal.pthread_sigmask(signal.SIG_BLOCK, STOP_SIGNALS)
    child.start()
    signal.pthread_sigmask(signal.SIG_UNBLOCK, STOP_SIGNALS)
    return child


def _be_child(what: Callable[[Settings], None], settings: Settings, parent: int) -> None:
    """First function of a child."""
    os.setpgrp()  # an interrupt from the terminal reaches the pool only, which passes it on
    for number in STOP_SIGNALS:
        signal.signal(number, signal.SIG_DFL)
    signal.pthread_sigmask(signal.SIG_UNBLOCK, STOP_SIGNALS)
    die_with_parent(signal.SIGTERM, parent=parent)
    what(settings)


def _be_worker(settings: Settings) -> None:
    importlib.import_module("workers.worker").work(settings)


def _be_housekeeper(settings: Settings) -> None:
    os.nice(19)
    try:
        keep_house(settings)
    except (OSError, StoreError) as error:
        log.warning("the store could not be looked after: %s", error)


def run_pool(settings: Settings) -> None:
    """Run the workers of this machine, with a private Redis server unless one is named.

    Loads the numerical and drawing stack into this process, once; the workers are forked from it.
    """
    for name in [name for name in os.environ if name.startswith(PREFIX)]:
        del os.environ[name]
    os.environ.update({**ONE_THREAD, **settings.as_environment()})
    server = PrivateRedis(settings.store) if settings.redis_url is None else nullcontext()
    with layout.in_use(settings.store), server as private:
        # Only now: numerical libraries read the number of threads when they are loaded.
        importlib.import_module("workers.worker")
        importlib.import_module("workers.pipeline").warm_up()
        Pool(settings, private).run()


def main() -> int:
    """Run the pool as a child that ends with its parent."""
    die_with_parent(signal.SIGTERM)
    try:
        settings = Settings.from_environment()
        logs.configure(settings.log_level)
        run_pool(settings)
    except FishplateError as error:
        print(error, file=sys.stderr)
        return 1
    return 0


if __name__ == "__main__":
    sys.exit(main())
