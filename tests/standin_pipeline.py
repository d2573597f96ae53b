"""Stands in for `workers.pipeline` where the service is tested: does what the document tells it.

The document is {"do": NAME, ...}; each name is a function below. Started as a program, it is a pool
whose workers use this module instead of the real pipeline:

    python -m tests.standin_pipeline
"""

import ctypes
import json
import os
import signal
import sys
import time
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np

Progress = Callable[[str, float], None]
RESULTS = ("results.json", "fields/lift.vtu", "previews/lift/von_mises.png")


def warm_up() -> None:
    """Nothing to load."""


def run(
    document: bytes,
    folder: Path,
    *,
    job_id: str | None,
    progress: Progress,
    pictures: int = 6,
    most_dofs: int | None = None,
    seconds: float = 0.0,
    shared: Any = None,
    memory: float | None = None,
) -> dict[str, Any]:
    order = json.loads(document)
    (folder.parent / f"begun-{time.monotonic_ns()}").touch()
    company = "alone" if shared is None else "shared"
    (folder.parent / f"{company}-{os.getpid()}").touch()
    globals()["do_" + order.pop("do")](folder, progress, **order)
    for name in RESULTS:
        path = folder / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_bytes(document)
    return {"cautions": [{"code": "made-up"}], "units": {}, "mesh": {}, "envelope": {}}


def write_fields(folder: Path, case: str) -> Path:
    path = folder / "fields" / f"{case}.vtu"
    path.write_text(case)
    return path


def render(folder: Path, case: str, quantity: str) -> Path:
    path = folder / "previews" / case / f"{quantity}.png"
    path.parent.mkdir(parents=True, exist_ok=True)
    path.write_text(quantity)
    return path


def render_line(folder: Path, name: str) -> Path:
    path = folder / "lines" / f"{name}.png"
    path.parent.mkdir(parents=True, exist_ok=True)
    path.write_text(name)
    return path


def do_nothing(folder: Path, progress: Progress) -> None:
    progress("reading", 1.0)


def do_wait(folder: Path, progress: Progress, seconds: float = 60.0) -> None:
    """Report progress until the time is over or a file `go` lies in the job's folder."""
    until = time.monotonic() + seconds
    while time.monotonic() < until and not (folder.parent / "go").exists():
        progress("solving", 0.25)
        time.sleep(0.02)


def do_die(folder: Path, progress: Progress, times: int, signal_number: int = 9) -> None:
    """Be killed in the first `times` attempts."""
    if len(list(folder.parent.glob("begun-*"))) <= times:
        (folder / "half").write_text("half a result")
        os.kill(os.getpid(), signal_number)


def do_leave_child(folder: Path, progress: Progress) -> None:
    """Start a process that holds whatever this one holds, and be killed in the first attempt."""
    if len(list(folder.parent.glob("begun-*"))) == 1:
        if os.fork() == 0:
            (folder.parent / f"child-{os.getpid()}").touch()
            time.sleep(60.0)
        os.kill(os.getpid(), signal.SIGKILL)


def do_block(folder: Path, progress: Progress, seconds: int) -> None:
    """Sit in one call into compiled code that holds the interpreter lock."""
    signal.pthread_sigmask(signal.SIG_BLOCK, {signal.SIGALRM})
    ctypes.PyDLL(None).sleep(seconds)


def do_allocate(folder: Path, progress: Progress, bytes: int) -> None:
    np.ones(bytes // 8)


def do_fill(folder: Path, progress: Progress, bytes: int) -> None:
    with (folder / "large").open("wb") as file:
        file.write(b"\0" * bytes)


def do_raise(folder: Path, progress: Progress, error: str, message: str) -> None:
    from workers import errors  # noqa: PLC0415  the stand-in must load before workers does

    if error == "DocumentError":
        raise errors.DocumentError([errors.Fault("/plate", message)])
    raise RuntimeError(message)


if __name__ == "__main__":
    # `workers` itself is an empty package; its pipeline is whatever stands here.
    sys.modules["workers.pipeline"] = sys.modules["__main__"]
    from workers.pool import main

    sys.exit(main())
