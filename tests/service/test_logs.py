"""Log entries: one JSON object a line, with the request and the job that they belong to."""

import json
import logging
import logging.config
import threading
from collections.abc import Iterator
from io import StringIO
from typing import Any

import pytest

from workers import logs


@pytest.fixture
def lines() -> Iterator[StringIO]:
    """What a logger of its own writes."""
    written = StringIO()
    handler = logging.StreamHandler(written)
    handler.setFormatter(logs.JsonLines())
    log = logging.getLogger("fishplate.test")
    log.addHandler(handler)
    log.setLevel(logging.DEBUG)
    log.propagate = False
    logs.begin()
    yield written
    log.removeHandler(handler)


def entries(written: StringIO) -> list[dict[str, Any]]:
    return [json.loads(line) for line in written.getvalue().splitlines()]


def test_an_entry_is_one_line_whatever_is_in_it() -> None:
    """A title with a line break must not make a second entry (log injection, CWE-117)."""
    title = 'a\r\n{"level": "x"}\u2028\udcff'
    record = logging.LogRecord("fishplate.test", logging.WARNING, "", 1, "job %s", (title,), None)
    line = logs.JsonLines().format(record)
    assert line.splitlines() == [line]
    entry = json.loads(line)
    assert (entry["level"], entry["logger"]) == ("warning", "fishplate.test")
    assert entry["message"] == f"job {title}"


def test_facts_belong_to_the_thread_and_to_the_block(lines: StringIO) -> None:
    log = logging.getLogger("fishplate.test")
    with logs.about(job="1"), logs.about(request="2"):
        log.info("inside")
        other = threading.Thread(target=log.info, args=("elsewhere",))
        other.start()
        other.join()
    log.info("outside", extra={"facts": {"path": "/docs"}})
    inside, elsewhere, outside = entries(lines)
    assert (inside["job"], inside["request"]) == ("1", "2")
    assert "job" not in elsewhere
    assert ("job" in outside, outside["path"]) == (False, "/docs")


def test_a_new_request_in_the_same_thread_forgets_the_one_before(lines: StringIO) -> None:
    logs.begin(request="1", job="9")
    logs.begin(request="2")
    logging.getLogger("fishplate.test").info("now")
    (entry,) = entries(lines)
    assert entry["request"] == "2"
    assert "job" not in entry


def test_a_trace_is_part_of_its_entry(lines: StringIO) -> None:
    try:
        raise RuntimeError("slipped")
    except RuntimeError:
        logging.getLogger("fishplate.test").exception("failed")
    (entry,) = entries(lines)
    assert "RuntimeError: slipped" in entry["trace"]


def test_gunicorn_writes_the_same_lines() -> None:
    configuration = logs.for_gunicorn("info")
    assert configuration["formatters"]["lines"]["()"] is logs.JsonLines
    logging.config.DictConfigurator(configuration)  # accepts its form
