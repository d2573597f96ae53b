"""The Prefer header, against the examples and the rules of RFC 7240."""

import threading

import pytest

from api.preferences import WaitingRoom, parse_prefer, wanted_wait


@pytest.mark.parametrize(
    ("header", "expected"),
    [
        # RFC 7240 section 2 and 4, the examples of the text
        ("respond-async, wait=100, handling=lenient",
         {"respond-async": "", "wait": "100", "handling": "lenient"}),
        ('foo; some-parameter=""', {"foo": ""}),
        ('Foo="", bar', {"foo": "", "bar": ""}),
        ('return=minimal; foo="some parameter"', {"return": "minimal"}),
        # section 2: specified more than once, only the first instance is to be considered
        ("wait=10, wait=20", {"wait": "10"}),
        ('a="x, y", wait=5', {"a": "x, y", "wait": "5"}),
        ("", {}),
        ("=, wait=5", {"wait": "5"}),
    ],
)  # fmt: skip
def test_preferences_are_read_as_the_rfc_writes_them(header: str, expected: dict[str, str]) -> None:
    assert parse_prefer(header) == expected


@pytest.mark.parametrize(
    ("header", "seconds"),
    [("wait=30", 30), ("WAIT = 7", 7), ("wait=-1", None), ("wait=1.5", None), ("wait=soon", None),
     ("wait", None), ("respond-async", None), ("", None), ("wait=0", 0)],
)  # fmt: skip
def test_only_whole_seconds_are_a_wait(header: str, seconds: int | None) -> None:
    """RFC 7240 section 4.3: wait = delta-seconds, digits only; anything else is ignored."""
    assert wanted_wait(header) == seconds


def test_waiting_ends_as_soon_as_the_condition_holds() -> None:
    done = threading.Event()
    threading.Timer(0.05, done.set).start()
    assert WaitingRoom(1).wait(done.is_set, 30)
    assert done.is_set()


def test_waiting_ends_when_the_time_is_up() -> None:
    assert WaitingRoom(1).wait(lambda: False, 0.05)


def test_without_a_free_seat_nobody_waits() -> None:
    """Otherwise waiting clients could occupy every thread of the server."""
    room = WaitingRoom(1)
    with room.seat() as first:
        assert first
        assert not room.wait(lambda: False, 30)
    assert room.wait(lambda: True, 30)
