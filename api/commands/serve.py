"""`fishplate serve`: everything on one machine, in the foreground."""

import os
import signal
import subprocess
import sys
import time
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from pathlib import Path
from types import FrameType
from typing import NoReturn

import click
from redis.exceptions import RedisError

from api.commands.http_server import ServerStartError, http_server
from api.commands.settings import STORE, settings_with
from api.commands.terminal import BAD_INPUT, FAILED, err, leave
from api.exposure import require_tokens_beyond_loopback
from elements.errors import FishplateError
from workers import layout
from workers.errors import SettingsError, StoreError
from workers.lineage import die_with_parent
from workers.queue import Queue
from workers.setting_table import as_help
from workers.settings import Settings

TICK = 0.2  # between two looks whether everything still runs [s]
PATIENCE = 120.0  # for the workers, which load the solver and the renderer first [s]


@click.command(epilog=as_help())
@click.option("--host", help="Address to listen on; this machine only, if not given.")
@click.option(
    "--port", type=click.IntRange(0, 65535), help="Port to listen on; 0 takes a free one."
)
@STORE
@click.option("--workers", type=click.IntRange(0, 1024),
              help="Jobs to work on at a time; 0 leaves them to `fishplate work`.")  # fmt: skip
@click.option("--address-file", type=click.Path(dir_okay=False, path_type=Path),
              help="Write the address into this file once jobs can be sent.")  # fmt: skip
def command(
    host: str | None,
    port: int | None,
    store: Path | None,
    workers: int | None,
    address_file: Path | None,
) -> None:
    """Run queue, workers and HTTP server on this machine.

    Without FISHPLATE_REDIS_URL a private Redis server is started, whose files are in the store.
    With it, and --workers 0, this is the HTTP server alone.
    Beyond this machine it listens only when tokens have been made (`fishplate tokens add`). Stop
    with Ctrl-C or SIGTERM: running jobs may end, what does not is queued again at the next start.
    Nothing that was accepted is lost.
    """
    store = store.absolute() if store else None
    settings = settings_with(host=host, port=port, store=store, workers=workers)
    try:
        require_tokens_beyond_loopback(settings)
        _require_queue(settings)
    except FishplateError as error:
        leave(BAD_INPUT, str(error))
    _exit_on_signals()
    try:
        with (
            layout.in_use(settings.store),
            worker_pool(settings) as pool,
            http_server(settings) as (address, server),
        ):
            if pool is not None:
                _await_workers(settings, pool)
            _announce(address, settings, address_file)
            _watch({"the worker pool": pool, "the HTTP server": server})
    except (ServerStartError, StoreError) as error:
        leave(FAILED, str(error))


def _require_queue(settings: Settings) -> None:
    """A server without workers needs a queue that outlives it; raises SettingsError."""
    if settings.workers == 0 and settings.redis_url is None:
        raise SettingsError(
            "without workers (--workers 0) the queue must be elsewhere: set FISHPLATE_REDIS_URL to "
            "that of the workers"
        )


def _exit_on_signals() -> None:
    """Turn the first signal into an orderly exit; later ones do not disturb it."""

    def stop(_number: int, _frame: FrameType | None) -> NoReturn:
        for number in (signal.SIGTERM, signal.SIGINT):
            signal.signal(number, signal.SIG_IGN)
        err().print("stopping; running jobs have a moment to end ...")
        raise SystemExit(0)

    for number in (signal.SIGTERM, signal.SIGINT):
        signal.signal(number, stop)


@contextmanager
def worker_pool(settings: Settings) -> Iterator["subprocess.Popen[bytes] | None"]:
    """Have the workers running, in a process of their own that ends with this one.

    Yields None where they are to run elsewhere.
    """
    if settings.workers == 0:
        yield None
        return
    parent = os.getpid()
    process = subprocess.Popen(
        [sys.executable, "-m", "workers.pool"],
        env={**os.environ, **settings.as_environment()},
        # Not in our process group: an interrupt from the terminal is for us to pass on, in order.
        start_new_session=True,
        preexec_fn=lambda: die_with_parent(signal.SIGTERM, parent),  # noqa: PLW1509
    )
    try:
        yield process
    finally:
        process.terminate()
        process.wait()


def _await_workers(settings: Settings, pool: "subprocess.Popen[bytes]") -> None:
    queue = Queue(settings)
    until = time.monotonic() + PATIENCE
    while not _workers_alive(queue):
        if pool.poll() is not None:
            raise ServerStartError(f"the workers ended at once, status {pool.returncode}")
        if time.monotonic() > until:
            raise ServerStartError(f"no worker came up within {PATIENCE:.0f} s")
        time.sleep(TICK)


def _workers_alive(queue: Queue) -> int:
    try:
        return queue.workers_alive()
    except RedisError:  # the pool starts the private server first, then the workers
        return 0


def _announce(address: str, settings: Settings, address_file: Path | None) -> None:
    console = err()
    console.print(f"Fishplate listens at [bold]{address}[/bold]", soft_wrap=True)
    console.print(f"{address}/docs tells how to use it", soft_wrap=True, style="dim")
    console.print(f"jobs are kept in {settings.store}", soft_wrap=True, style="dim")
    if address_file:
        # Written beside and renamed: a reader never sees half an address.
        scratch = address_file.with_name(address_file.name + ".new")
        scratch.write_text(address + "\n")
        scratch.replace(address_file)


def _watch(parts: "Mapping[str, subprocess.Popen[bytes] | None]") -> None:
    """Return never; raise when one of the processes ends by itself."""
    while True:
        for name, process in parts.items():
            if process is not None and process.poll() is not None:
                raise ServerStartError(f"{name} ended, status {process.returncode}")
        time.sleep(TICK)
