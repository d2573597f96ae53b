"""The Prefer header (RFC 7240): how long a client would like to wait for an answer."""

import math
import re
import threading
import time
from collections.abc import Callable, Iterator, Mapping
from contextlib import contextmanager

# preference = token [ "=" (token | quoted-string) ] *( ";" [ parameter ] ), RFC 7240 section 2
_PREFERENCE = re.compile(
    r"""\s*(?P<name>[!#$%&'*+.^_`|~0-9A-Za-z-]+)
        (?:\s*=\s*(?:"(?P<quoted>(?:[^"\\]|\\.)*)"|(?P<word>[^\s,;"]*)))?
        (?P<parameters>(?:\s*;[^,"]*(?:"(?:[^"\\]|\\.)*"[^,"]*)*)?)\s*(?:,|$)""",
    re.VERBOSE,
)


def parse_prefer(header: str) -> Mapping[str, str]:
    """Preferences by lower-case name; the first of a name counts, as RFC 7240 asks.

    What cannot be parsed is passed over: a preference is a wish and never an error.
    """
    found: dict[str, str] = {}
    position = 0
    while position < len(header):
        match = _PREFERENCE.match(header, position)
        if match is None:
            comma = header.find(",", position)
            position = len(header) if comma < 0 else comma + 1
            continue
        value = match["quoted"] if match["quoted"] is not None else match["word"] or ""
        found.setdefault(match["name"].lower(), value)
        position = match.end()
    return found


def wanted_wait(header: str) -> int | None:
    """Seconds of `wait=`, or None where the header does not ask (or not in whole seconds)."""
    value = parse_prefer(header).get("wait", "")
    return int(value) if re.fullmatch(r"[0-9]{1,9}", value) else None


class WaitingRoom:
    """Bounds how many requests wait at a time, so that waiting never takes every thread."""

    def __init__(self, seats: int) -> None:
        self._seats = threading.BoundedSemaphore(seats)

    @contextmanager
    def seat(self) -> Iterator[bool]:
        """True when there was a free seat; False means: answer at once."""
        taken = self._seats.acquire(blocking=False)
        try:
            yield taken
        finally:
            if taken:
                self._seats.release()

    def wait(self, done: Callable[[], bool], seconds: float) -> bool:
        """Hold until done() or until the time is up; False when no seat was free for that.

        Asks at growing intervals: a short job is answered soon, a long one costs few looks.
        """
        deadline = time.monotonic() + seconds
        pause = 0.02
        with self.seat() as seated:
            while seated and not done() and time.monotonic() < deadline:
                time.sleep(min(pause, max(deadline - time.monotonic(), 0)))
                pause = min(pause * 1.5, 0.5)
            return seated


def applied(seconds: float) -> dict[str, str]:
    """Headers that say that a wait was granted, and for how long at most."""
    return {"Preference-Applied": f"wait={math.floor(seconds)}", "Vary": "Prefer"}
