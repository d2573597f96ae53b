"""Work in a process of its own: what it leaks, and what kills it, ends with it."""

import signal
from collections.abc import Callable
from multiprocessing import get_context
from multiprocessing.connection import Connection
from typing import Any

from api.commands.terminal import Report
from elements.errors import FishplateError

PROGRESS, RESULT = "progress", "result"
# Imported once, in the process from which the others are forked; a job finds all at hand.
PRELOADED = ["api.commands.warm"]


class ProcessDiedError(FishplateError, RuntimeError):
    """The process ended before it gave a result.

    status : its exit status; negative for the signal that killed it
    """

    def __init__(self, status: int | None) -> None:
        self.status = status
        how = f"status {status}" if not status or status > 0 else signal.Signals(-status).name
        super().__init__(f"its process ended without a result ({how})")


def apart(work: Callable[..., Any], *arguments: Any, report: Report) -> Any:
    """What `work(report, *arguments)` returns; all of them must be picklable.

    Raises
    ------
    ProcessDiedError   it ended without a result, whatever the reason.
    """
    context = get_context("forkserver")
    context.set_forkserver_preload(PRELOADED)
    receiver, sender = context.Pipe(duplex=False)
    process = context.Process(target=_child, args=(sender, work, arguments))
    process.start()
    sender.close()
    try:
        while True:
            kind, *content = receiver.recv()
            if kind == RESULT:
                return content[0]
            report(*content)
    except EOFError:
        process.join()
        raise ProcessDiedError(process.exitcode) from None
    finally:
        receiver.close()
        if process.exitcode is None:
            process.terminate()
        process.join()


def _child(sender: Connection, work: Callable[..., Any], arguments: tuple[Any, ...]) -> None:
    # The parent, interrupted, ends this process; nobody else needs to hear of it.
    signal.signal(signal.SIGINT, signal.SIG_IGN)

    def report(stage: str, fraction: float) -> None:
        sender.send((PROGRESS, stage, fraction))

    sender.send((RESULT, work(report, *arguments)))
