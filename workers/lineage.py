"""Processes that end with the process that started them."""

import ctypes
import os
import signal
import sys

PR_SET_PDEATHSIG = 1  # prctl(2)


def die_with_parent(number: signal.Signals, parent: int | None = None) -> None:
    """Have the kernel send a signal to this process when its parent dies, however it dies.

    parent : process id of the parent, where the caller knows it; should it have died before this
        call, the signal is sent at once. Only Linux can do this; elsewhere nothing happens.
    """
    if not sys.platform.startswith("linux"):
        return
    library = ctypes.CDLL(None, use_errno=True)
    if library.prctl(PR_SET_PDEATHSIG, int(number), 0, 0, 0) != 0:
        raise OSError(ctypes.get_errno(), "prctl(PR_SET_PDEATHSIG) failed")
    if parent is not None and os.getppid() != parent:
        os.kill(os.getpid(), number)
