"""A Redis server of our own, for an installation on one machine.

It listens on a Unix socket only, keeps an append-only file in the store folder, and ends with the
process that started it. Whoever comes second to the same store shares the first one's server.
"""

import fcntl
import hashlib
import logging
import os
import shutil
import signal
import subprocess
import tempfile
import time
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import redis

from workers.errors import StoreError
from workers.lineage import die_with_parent

LONGEST_SOCKET_PATH = 100  # sockaddr_un holds 108 bytes; the server adds a suffix of its own
PATIENCE = 20.0  # for the server to come up, with a long append-only file to read [s]
log = logging.getLogger(__name__)


def socket_path(store: Path) -> Path:
    """Where the private server of a store listens: in the store, or under /tmp if that is deep."""
    path = store / "redis" / "redis.sock"
    if len(os.fsencode(path)) <= LONGEST_SOCKET_PATH:
        return path
    digest = hashlib.sha256(os.fsencode(store)).hexdigest()[:16]
    return Path(tempfile.gettempdir()) / f"fishplate-{os.getuid()}-{digest}" / "redis.sock"


def address(store: Path) -> str:
    """URL of the private server of a store."""
    return f"unix://{socket_path(store)}"


@contextmanager
def private_redis(store: Path) -> Iterator[str]:
    """Have the private server of a store running; yields its URL.

    Raises
    ------
    StoreError   no redis-server is installed, or it does not come up.
    """
    folder = store / "redis"
    path = socket_path(store)
    for needed in (folder, path.parent):
        needed.mkdir(parents=True, exist_ok=True, mode=0o700)
    if path.parent.stat().st_uid != os.getuid():
        raise StoreError(f"{path.parent} belongs to another user; set FISHPLATE_REDIS_URL instead")
    server = _start(folder, path)
    try:
        _await(path, server, folder)
        yield address(store)
    finally:
        if server is not None:
            server.terminate()
            server.wait()


def _start(folder: Path, path: Path) -> "subprocess.Popen[bytes] | None":
    """Start the server unless one is running; the server itself holds the lock while it lives."""
    program = shutil.which("redis-server")
    descriptor = os.open(folder / "server.lock", os.O_RDWR | os.O_CREAT, 0o600)
    try:
        fcntl.flock(descriptor, fcntl.LOCK_EX | fcntl.LOCK_NB)
        if program is None:
            raise StoreError(
                "no redis-server is installed on this machine; install it (Debian: apt install "
                "redis-server) or set FISHPLATE_REDIS_URL to a server that runs elsewhere"
            )
        with (folder / "redis.log").open("ab") as output:
            return subprocess.Popen(
                [program, *_options(folder, path)],
                stdin=subprocess.DEVNULL,
                stdout=output,
                stderr=output,
                pass_fds=(descriptor,),
                # Not in our process group: an interrupt from the terminal is for us to pass on.
                start_new_session=True,
                preexec_fn=lambda: die_with_parent(signal.SIGTERM),  # noqa: PLW1509
            )
    except BlockingIOError:
        log.info("sharing the Redis server that already serves %s", folder.parent)
        return None
    finally:
        os.close(descriptor)


def _options(folder: Path, path: Path) -> list[str]:
    options = {
        "port": "0",
        "unixsocket": str(path),
        "unixsocketperm": "700",
        "dir": str(folder),
        "appendonly": "yes",
        "appendfsync": "everysec",
        "save": "",
        "daemonize": "no",
        "maxmemory-policy": "noeviction",
    }
    return [part for name, value in options.items() for part in (f"--{name}", value)]


def _await(path: Path, server: "subprocess.Popen[bytes] | None", folder: Path) -> None:
    until = time.monotonic() + PATIENCE
    with redis.Redis(unix_socket_path=str(path), socket_timeout=1.0) as client:
        while True:
            try:
                client.ping()
                return
            except redis.RedisError as error:
                if server is not None and server.poll() is not None:
                    raise StoreError(
                        f"redis-server ended with code {server.returncode}; see {folder}/redis.log"
                    ) from error
                if time.monotonic() > until:
                    raise StoreError(f"redis-server does not answer on {path}: {error}") from error
            time.sleep(0.05)
