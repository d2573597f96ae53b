"""Work that does not end well, for processes that import it by name."""

import os
import signal
from typing import Any

from api.commands.documents import Document
from api.commands.outcomes import Outcome
from api.commands.solve import attempt


def die(report: Any, *_arguments: Any) -> None:
    """As a crash in a compiled library does."""
    report("drawing", 0.5)
    os.kill(os.getpid(), signal.SIGSEGV)


def crash_if_odd(report: Any, document: Document, *arguments: Any) -> Outcome:
    """`attempt`, except for documents named `d`, which meet a fault of the program, and `e`."""
    if document.name == "e":
        die(report)
    if document.name == "d":
        nothing: Any = None  # in place of the folder, as only a fault of the program would give it
        return attempt(report, document, nothing, *arguments[1:])
    return attempt(report, document, *arguments)
