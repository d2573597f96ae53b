"""The page of the jobs for a person with a browser."""

import re
from collections.abc import Callable
from html import unescape
from pathlib import Path
from typing import Any

import pytest
from flask.testing import FlaskClient

from api.services import Services
from tests.browser import LOW_CONTRAST, OVERFLOW, Browser
from tests.job_documents import strip
from workers.cautions import STANDING
from workers.errors import Fault
from workers.record import CANCELLED, FAILED, RUNNING

HOSTILE = '<script>alert(1)</script> & "x"'


@pytest.fixture
def yard(services: Services, finish: Callable[[str], None]) -> dict[str, str]:
    """One job in each state, by state."""
    accept = services.store.accept
    ids = {
        state: accept(b"{}", title=f"Plate {state}", label="berth 4").record.id
        for state in ("queued", "running", "finished", "failed", "cancelled")
    }
    services.store.transition(ids["running"], RUNNING)
    services.queue.set_progress(ids["running"], "solving", 0.42)
    finish(ids["finished"])
    services.store.transition(ids["failed"], RUNNING)
    faults = (Fault("/supports", "part 1 can rotate"),)
    services.store.transition(ids["failed"], FAILED, reason="free to move", faults=faults)
    services.store.transition(ids["cancelled"], CANCELLED)
    return ids


def words(html: str) -> str:
    """The text of a page, white space as single spaces."""
    body = re.sub(r"(?s)<(head|style).*?</\1>", "", html)
    return " ".join(unescape(re.sub(r"<[^>]+>", " ", body)).split())


@pytest.mark.parametrize("address", ["/", "/jobs"])
def test_every_job_is_shown_with_its_state(
    client: FlaskClient, yard: dict[str, str], address: str
) -> None:
    answer = client.get(address)
    assert answer.mimetype == "text/html"
    shown = words(answer.text)
    for state, job_id in yard.items():
        assert re.search(rf"Plate {state} berth 4 · {job_id} {state}\b", shown)
    assert "solving 42 %" in shown
    assert "free to move" in shown
    assert "1 check 2 note" in shown


def test_sheets_of_finished_jobs_are_linked(client: FlaskClient, yard: dict[str, str]) -> None:
    html = client.get("/").text
    assert f'href="/v1/jobs/{yard["finished"]}/sheet"' in html
    assert f'href="/v1/jobs/{yard["finished"]}/archive.zip"' in html
    assert not re.search(f"{yard['running']}/(sheet|archive)", html)


def test_standing_cautions_are_on_the_page(client: FlaskClient) -> None:
    shown = words(client.get("/").text)
    for caution in STANDING:
        assert caution.message in shown
        assert caution.action in shown


def test_an_empty_server_says_how_to_begin(client: FlaskClient) -> None:
    assert "No jobs yet" in words(client.get("/").text)


def test_titles_are_text_whatever_they_look_like(
    client: FlaskClient, post: Callable[..., Any]
) -> None:
    post({**strip(), "title": HOSTILE, "label": HOSTILE})
    html = client.get("/").text
    assert "<script" not in html
    assert words(html).count(HOSTILE) == 2
    (label,) = re.findall(r'href="(/jobs\?label=[^"]+)"', html)
    assert HOSTILE in words(client.get(unescape(label)).text)


def test_the_page_asks_for_itself_often_only_while_something_goes_on(
    client: FlaskClient, services: Services, post: Callable[..., Any], finish: Callable[[str], None]
) -> None:
    def pause(address: str) -> int | None:
        found = re.search(r'http-equiv="refresh" content="(\d+)"', client.get(address).text)
        return int(found[1]) if found else None

    idle = pause("/")
    job = post().get_json()["id"]
    busy = pause("/")
    assert idle is not None
    assert busy is not None
    assert busy < idle
    assert pause("/?hold=true") is None  # WCAG 2.2, 2.2.2: what renews itself can be held
    finish(job)
    assert pause("/") == idle


def test_jobs_are_chosen_by_state_and_label(client: FlaskClient, yard: dict[str, str]) -> None:
    """As the form sends it: what was left empty is sent as well."""
    assert yard["failed"] in client.get("/jobs?state=failed&label=").text
    assert yard["queued"] not in client.get("/jobs?state=failed&label=").text
    assert "No jobs like that" in words(client.get("/jobs?label=berth+5&state=").text)


def test_older_jobs_are_a_link_away(client: FlaskClient, yard: dict[str, str]) -> None:
    seen, address = [], "/jobs?limit=2"
    while address:
        html = client.get(address).text
        seen += re.findall(r"· (\w{26})", html)
        found = re.search(r'href="([^"]+)" rel="next"', html)
        address = unescape(found[1]) if found else ""
    assert seen == list(reversed(yard.values()))


def test_a_wrong_parameter_is_a_problem_that_names_it(client: FlaskClient) -> None:
    problem = client.get("/jobs?state=lost&colour=red").get_json()
    assert problem["status"] == 400
    assert {error["parameter"] for error in problem["errors"]} == {"state", "colour"}


def test_the_page_needs_nothing_from_elsewhere(client: FlaskClient, yard: dict[str, str]) -> None:
    answer = client.get("/")
    assert answer.headers["Content-Security-Policy"].startswith("default-src 'none'")
    assert not re.search(
        r"<(script|link|img|iframe)\b|@import|url\(|(src|href)=.?https?:", answer.text
    )


@pytest.mark.slow
@pytest.mark.parametrize("address", ["/jobs?hold=true", "/docs"])
@pytest.mark.parametrize("width", [1400, 390])
def test_pages_are_readable_at_a_desk_and_on_a_phone(
    chromium: Browser,
    client: FlaskClient,
    services: Services,
    yard: dict[str, str],
    tmp_path: Path,
    width: int,
    address: str,
) -> None:
    services.store.accept(b"{}", title="W" * 200, label=HOSTILE)
    path = tmp_path / "page.html"
    path.write_text(client.get(address).text, encoding="utf-8")
    page = chromium.open(path.as_uri(), width)
    assert page.evaluate(OVERFLOW) == []
    assert page.evaluate("document.documentElement.scrollWidth") <= width
    assert page.evaluate(LOW_CONTRAST)["low"] == []
    assert page.requests == [path.as_uri()]
