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
import socket
import subprocess
import tempfile
import time
from contextlib import suppress
from pathlib import Path
from typing import Self

import redis

from workers.errors import StoreError
from workers.lineage import die_with_parent

LONGEST_SOCKET_PATH = 100  # sockaddr_un holds 108 bytes; the server adds a suffix of its own
DATA = "appendonlydir"  # the server's own name
REFUSED = "refused"  # data that the server could not read
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


class PrivateRedis:
    """The private server of one store; a context manager, inside which it is running.

    Raises
    ------
    StoreError   no redis-server is installed, or it does not come up.
    """

    def __init__(self, store: Path) -> None:
        self.folder = store / "redis"
        self.socket = socket_path(store)
        self.url = address(store)
        self._process: subprocess.Popen[bytes] | None = None

    def __enter__(self) -> Self:
        for needed in (self.folder, self.socket.parent):
            needed.mkdir(parents=True, exist_ok=True, mode=0o700)
        if self.socket.parent.stat().st_uid != os.getuid():
            raise StoreError(
                f"{self.socket.parent} belongs to another user; set FISHPLATE_REDIS_URL instead"
            )
        self.keep_alive()
        try:
            self._await()
        except StoreError:
            self.__exit__()
            raise
        return self

    def __exit__(self, *_exception: object) -> None:
        if self._process is not None:
            self._process.terminate()
            self._process.wait()

    def keep_alive(self) -> None:
        """Start the server if neither we nor anybody else has it running."""
        if self._process is None or self._process.poll() is not None:
            if self._process is not None and self._process.returncode > 0:
                self._set_data_aside()
            self._process = self._start()

    def _set_data_aside(self) -> None:
        """Begin without data after the server refused to: the store knows what has to be done."""
        data, refused = self.folder / DATA, self.folder / REFUSED
        if data.exists():
            log.error("redis-server could not begin with %s, which becomes %s", data, refused.name)
            shutil.rmtree(refused, ignore_errors=True)
            data.rename(refused)

    def _start(self) -> "subprocess.Popen[bytes] | None":
        """Start the server unless one is running: it holds the lock itself, as long as it lives."""
        descriptor = os.open(self.folder / "server.lock", os.O_RDWR | os.O_CREAT, 0o600)
        try:
            fcntl.flock(descriptor, fcntl.LOCK_EX | fcntl.LOCK_NB)
            with suppress(OSError):  # a full disk; then another machine is told less
                os.ftruncate(descriptor, 0)
                os.pwrite(descriptor, socket.gethostname().encode(), 0)
            with (self.folder / "redis.log").open("ab") as output:
                return subprocess.Popen(
                    [_program(), *_options(self.folder, self.socket)],
                    stdin=subprocess.DEVNULL,
                    stdout=output,
                    stderr=output,
                    pass_fds=(descriptor,),
                    # Not in our process group: an interrupt from the terminal is for us to pass on.
                    start_new_session=True,
                    preexec_fn=lambda: die_with_parent(signal.SIGTERM),  # noqa: PLW1509
                )
        except BlockingIOError:
            self._require_same_machine(descriptor)
            return None
        finally:
            os.close(descriptor)

    def _require_same_machine(self, lock: int) -> None:
        """Whoever comes second shares the socket, which does not reach to another machine."""
        owner = os.pread(lock, 255, 0).decode(errors="replace")
        if owner not in ("", socket.gethostname()):
            raise StoreError(
                f"the private Redis server of this store runs on {owner}: for workers on several "
                "machines set FISHPLATE_REDIS_URL on all of them, to a server that they reach"
            )

    def _await(self) -> None:
        until = time.monotonic() + PATIENCE
        with redis.Redis(unix_socket_path=str(self.socket), socket_timeout=1.0) as client:
            while True:
                try:
                    client.ping()
                    return
                except redis.RedisError as error:
                    self._give_up_if_hopeless(error, until)
                time.sleep(0.05)

    def _give_up_if_hopeless(self, error: redis.RedisError, until: float) -> None:
        if self._process is not None and self._process.poll() is not None:
            if self._process.returncode > 0 and (self.folder / DATA).exists():
                self.keep_alive()
                return
            raise StoreError(
                f"redis-server ended with status {self._process.returncode}; see "
                f"{self.folder / 'redis.log'}"
            ) from error
        if time.monotonic() > until:
            raise StoreError(f"redis-server does not answer on {self.socket}: {error}") from error


def _program() -> str:
    program = shutil.which("redis-server")
    if program is None:
        raise StoreError(
            "no redis-server is installed on this machine; install it (Debian: apt install "
            "redis-server) or set FISHPLATE_REDIS_URL to a server that runs elsewhere"
        )
    return program


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
