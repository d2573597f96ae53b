"""Can this machine render without a screen, and by which library?

A missing library does not raise: VTK ends the process with a segmentation fault. So the question
is asked in a child process, which runs `trial.py`.
"""

import ctypes.util
import os
import signal
import subprocess
import sys
from functools import cache

from workers.errors import PicturesUnavailableError

WINDOW = "VTK_DEFAULT_OPENGL_WINDOW"  # read by VTK when it makes its first window
WINDOWS = ("vtkEGLRenderWindow", "vtkOSOpenGLRenderWindow")
TRIAL = (sys.executable, "-m", "workers.outputs.drawing.trial")
SECONDS = 60.0  # a first render takes 1-3 s; a machine with no free core longer


@cache
def probe() -> str | None:
    """Why this machine cannot render, in plain words; None when it can.

    Chooses the kind of window for this process and its children. Asked once per process.
    """
    given = os.environ.get(WINDOW)
    reasons = []
    for window in (given,) if given else WINDOWS:
        reason = _try(window)
        if reason is None:
            os.environ[WINDOW] = window
            return None
        reasons.append(f"{window}: {reason}")
    return (
        f"no off-screen rendering here ({'; '.join(reasons)}). {_missing_libraries()}"
        "Results, tables and VTK files are complete without pictures."
    )


def require() -> None:
    """Raise PicturesUnavailableError, with the reason, where this machine cannot render."""
    reason = probe()
    if reason is not None:
        raise PicturesUnavailableError(reason)


def _try(window: str) -> str | None:
    """Render in a child process with this kind of window; the reason when that fails."""
    try:
        child = subprocess.run(
            TRIAL,
            env={**os.environ, WINDOW: window},
            capture_output=True,
            text=True,
            timeout=SECONDS,
            check=False,
        )
    except subprocess.TimeoutExpired:
        return f"a small test picture was not ready after {SECONDS:g} s"
    if child.returncode == 0:
        return None
    if child.returncode < 0:
        name = signal.Signals(-child.returncode).name
        return f"the test picture ended the process with {name}"
    lines = child.stderr.strip().splitlines()
    return lines[-1] if lines else f"the test picture failed with exit code {child.returncode}"


def _missing_libraries() -> str:
    wanted = {"EGL": "libegl1", "GL": "libgl1", "OSMesa": "libosmesa6"}
    missing = [f"lib{name}" for name in wanted if ctypes.util.find_library(name) is None]
    if not missing:
        return ""
    return (
        f"Not found on this machine: {', '.join(missing)}. On Debian install libegl1 and libgl1, "
        "or libosmesa6. "
    )
