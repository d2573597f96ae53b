"""The HTTP server process: gunicorn with the Flask application, on a socket that we have bound.

Binding here, not in gunicorn, tells at once whether the port is free, and which port 0 became.
"""

import os
import signal
import socket
import subprocess
import sys
import time
from collections.abc import Iterator
from contextlib import contextmanager
from http.client import HTTPConnection, HTTPException

from elements.errors import FishplateError
from workers.lineage import die_with_parent
from workers.settings import Settings

PROCESSES = 2  # so that one large document being read does not hold up everybody else
BACKLOG = 1024  # connections that may wait for a thread
PATIENCE = 60.0  # for the first answer [s]
HEARTBEAT = 120  # silence of a process after which it is started anew [s]; requests do not matter
GRACE = 5  # for requests under way when the server stops [s]; accepted jobs are safe anyway


class ServerStartError(FishplateError, RuntimeError):
    """The HTTP server cannot listen or does not come up."""


@contextmanager
def http_server(settings: Settings) -> Iterator["tuple[str, subprocess.Popen[bytes]]"]:
    """Have the HTTP server running; yields its address and process.

    Raises
    ------
    ServerStartError   the port is taken, or the server ends before it answers.
    """
    with _listen(settings.host, settings.port) as listener:
        host, port = listener.getsockname()[:2]
        process = _start(settings, listener)
    # From here on the socket is gunicorn's alone: should it end, nobody waits for an answer.
    try:
        _await(process, host, port)
        yield f"http://{f'[{host}]' if ':' in host else host}:{port}", process
    finally:
        process.terminate()
        process.wait()


def _listen(host: str, port: int) -> socket.socket:
    try:
        family, kind, protocol, _, where = socket.getaddrinfo(
            host, port, type=socket.SOCK_STREAM, flags=socket.AI_PASSIVE
        )[0]
        listener = socket.socket(family, kind, protocol)
        listener.setsockopt(socket.SOL_SOCKET, socket.SO_REUSEADDR, 1)
        listener.bind(where)
        listener.listen(BACKLOG)
    except OSError as error:
        raise ServerStartError(f"cannot listen on {host} port {port}: {error.strerror}") from error
    return listener


def _start(settings: Settings, listener: socket.socket) -> "subprocess.Popen[bytes]":
    parent = os.getpid()
    options = {
        "bind": f"fd://{listener.fileno()}",
        "workers": PROCESSES,
        "worker-class": "api.http_worker.Worker",
        "threads": settings.api_threads,
        "timeout": HEARTBEAT,
        "graceful-timeout": GRACE,
        "config": "python:api.gunicorn_config",
    }
    return subprocess.Popen(
        [
            *(sys.executable, "-m", "gunicorn", "api.app:create_app()", "--no-control-socket"),
            *(f"--{name}={value}" for name, value in options.items()),
        ],
        env={**os.environ, **settings.as_environment()},
        pass_fds=(listener.fileno(),),
        # Not in our process group: an interrupt from the terminal is for us to pass on, in order.
        start_new_session=True,
        preexec_fn=lambda: die_with_parent(signal.SIGTERM, parent),  # noqa: PLW1509
    )


def _await(process: "subprocess.Popen[bytes]", host: str, port: int) -> None:
    reachable = {"0.0.0.0": "127.0.0.1", "::": "::1"}.get(host, host)
    until = time.monotonic() + PATIENCE
    while time.monotonic() < until:
        if process.poll() is not None:
            raise ServerStartError(f"the HTTP server ended at once, status {process.returncode}")
        connection = HTTPConnection(reachable, port, timeout=PATIENCE)
        try:
            connection.request("GET", "/health/live")
            if connection.getresponse().status == 200:
                return
        except (OSError, HTTPException):
            time.sleep(0.05)
        finally:
            connection.close()
    raise ServerStartError(f"the HTTP server did not answer within {PATIENCE:.0f} s")
