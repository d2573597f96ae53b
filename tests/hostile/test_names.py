"""Names that mean something to whoever reads them next: paths, pages, headers, tables."""

import csv
import io
import re
from collections.abc import Iterator
from dataclasses import dataclass
from html.parser import HTMLParser
from pathlib import Path
from typing import Any

import orjson
import pytest
from flask import Flask
from werkzeug.routing import Rule
from werkzeug.test import TestResponse

import api
from api.services import KEY
from tests.hostile.odd_jobs import NAMES
from tests.hostile.promises import keeps
from tests.hostile.site import fill, ready_app
from tests.job_documents import strip
from workers.outputs.csv_text import csv_text
from workers.pipeline import run
from workers.record import FINISHED, RUNNING

HERE = Path(api.__file__).parent.parent
SECRET = "what stands beside the store"
# As they stand in an address, percent-encoded or not.
TRICKS = (
    "..", ".", "%2e%2e", "..%2f..%2fsecret", "%2e%2e%2f%2e%2e%2fsecret", "..%5csecret", "%00",
    "pull%00", "secret%00.png", "%c0%ae%c0%ae%c0%af", "%252e%252e%252fsecret", "%2fetc%2fpasswd",
    "~", "x" * 300, "%f0%9f%9b%a5" * 60, "%E2%80%AE", "%EF%BC%8E%EF%BC%8E%EF%BC%8Fsecret",
    "%E2%88%95", "%0d%0aSet-Cookie:a=b", "%ff", "{{7*7}}", "%3Cscript%3E", "%27%22", "pull;a=b",
    "pull%20", "%20", "con", "-", "*", "$HOME", "%s%n",
)  # fmt: skip
MARKUP = "<script>alert(1)</script><img src=x onerror=a>\"'&amp;</style></title>{{7*7}}!"
MARKUP_COMPUTED = "49!"
TAGS = re.compile(r"alert\(1\)</script|<img src=x")
FORMULA = re.compile(r"[=+\-@\t\r]")


@dataclass(frozen=True)
class Yard:
    app: Flask
    ids: dict[str, str]
    odd: str  # id of a job, really solved, of which everything has an odd name

    def ask(self, path: str, method: str = "GET") -> TestResponse:
        return self.app.test_client().open(path, method=method, buffered=True)


def odd_document() -> Any:
    """A strip with markup as title and label, and a case for every odd name."""
    document = strip()
    pull = document["load_cases"]["pull"]
    first, *others = NAMES
    return {
        **document,
        "title": MARKUP,
        "label": MARKUP,
        "load_cases": dict.fromkeys((first, others[0]), pull),
        "combinations": {name: {first: 1.0} for name in others[1:]},
        "supports": [{**held, "name": NAMES[i]} for i, held in enumerate(document["supports"])],
        "requests": {
            "lines": {name: {"from": [1, 20], "to": [99, 20], "points": 5} for name in NAMES[:6]},
            "probes": {name: [50, 20] for name in NAMES},
            "cuts": {name: {"from": [50, -5], "to": [50, 45]} for name in NAMES[:3]},
        },
    }  # fmt: skip


@pytest.fixture(scope="module")
def yard(redis_url: str, tmp_path_factory: pytest.TempPathFactory) -> Iterator[Yard]:
    folder = tmp_path_factory.mktemp("names")
    (folder / "secret").write_text(SECRET)
    with (
        pytest.MonkeyPatch.context() as patch,
        ready_app(folder / "store", redis_url, patch) as app,
    ):
        store = app.extensions[KEY].store
        ids = fill(store)
        document = orjson.dumps(odd_document())
        odd = app.test_client().post("/v1/jobs", data=document, content_type="application/json")
        assert odd.status_code == 202
        odd_id = odd.get_json()["id"]
        store.transition(odd_id, RUNNING)
        with store.working(odd_id) as staging:
            results = run(document, staging, pictures=0)
            store.publish(odd_id, staging, results["cautions"])
        yield Yard(app, ids, odd_id)


def rules(app: Flask) -> list[Rule]:
    return [rule for rule in app.url_map.iter_rules() if rule.arguments]


def test_tricks_in_addresses_lead_nowhere(yard: Yard) -> None:
    """Every variable part of every address, the others being right."""
    known = {"job_id": yard.ids[FINISHED], "case": "pull", "quantity": "model", "line": "axis",
             "measure": "von_mises", "name": "peaks", "label": "x",
             "check_id": "0" * 32}  # fmt: skip
    asked = 0
    for rule in rules(yard.app):
        for method in sorted((rule.methods or set()) & {"GET", "PUT", "DELETE"}):
            for name in rule.arguments:
                for trick in TRICKS:
                    values = {**known, name: trick}
                    path = re.sub(r"<(?:\w+:)?(\w+)>", lambda found: values[found[1]], rule.rule)  # noqa: B023
                    answer = yard.ask(path, method)
                    asked += 1
                    assert answer.status_code in (308, 400, 404, 405, 409), (method, path)
                    assert SECRET not in answer.text
                    if answer.status_code != 308:
                        keeps(answer.status_code, dict(answer.headers), answer.data,
                              (yard.app.extensions[KEY].store.root, HERE))  # fmt: skip
    print(f"{asked} addresses with tricks")
    assert (yard.app.extensions[KEY].store.root.parent / "secret").read_text() == SECRET
    assert yard.ask(f"/v1/jobs/{yard.odd}/results").status_code == 200


class Page(HTMLParser):
    """Tags and attributes as a browser takes them."""

    def __init__(self, text: str) -> None:
        super().__init__()
        self.tags: set[str] = set()
        self.attributes: set[str] = set()
        self.addresses: list[str] = []
        self.feed(text)

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.add(tag)
        for name, value in attrs:
            self.attributes.add(name)
            if name in ("href", "src", "action", "xlink:href"):
                self.addresses.append(value or "")


@pytest.mark.parametrize("path", ["/", "/jobs", "/docs", "/v1/jobs/{}/sheet"])
def test_titles_and_names_are_text_on_every_page(yard: Yard, path: str) -> None:
    """Nothing that a client wrote becomes a tag, in HTML or SVG; no page runs any script."""
    answer = yard.ask(path.format(yard.odd))
    assert answer.status_code == 200
    page = Page(answer.text)
    assert not page.tags & {"script", "iframe", "object", "embed", "foreignobject", "base"}
    assert not [name for name in page.attributes if name.startswith("on")]
    assert not TAGS.search(answer.text)
    assert MARKUP_COMPUTED not in answer.text
    for address in page.addresses:
        assert re.match(r"(/|#|data:image/|\?|\w[\w.]*$)", address), address
    if path != "/v1/jobs/{}/sheet":
        policy = answer.headers["Content-Security-Policy"]
        assert "default-src 'none'" in policy
        assert "script-src" not in policy


def test_names_do_not_leave_their_headers(yard: Yard) -> None:
    """Content-Disposition (RFC 6266) and Link: one line, the name quoted or encoded."""
    for case in [*NAMES[:2], *NAMES[2:30]]:
        path = (
            f"/v1/jobs/{yard.odd}/fields/{re.sub('[#?%]', lambda m: f'%{ord(m[0]):02X}', case)}.vtu"
        )
        answer = yard.ask(path)
        if answer.status_code == 503:  # not made with the job, and there are no workers here
            continue
        assert answer.status_code == 200, path
        for name, value in answer.headers.items():
            assert re.fullmatch(r"[\x20-\x7e]*", value), (name, value)
        disposition = answer.headers["Content-Disposition"]
        assert re.fullmatch(
            r'inline; filename=("[^"\\]*"|[^\s;,"]+)|inline; filename\*=UTF-8\'\'[^\s;,"]+'
            r'|inline; filename="?[^";]*"?; filename\*=UTF-8\'\'[^\s;,"]+', disposition
        ), disposition  # fmt: skip


def test_tables_have_no_formulas(yard: Yard) -> None:
    """A spreadsheet computes what begins with = + - or @: names get an apostrophe."""
    found = yard.ask(f"/v1/jobs/{yard.odd}/tables/no-such.csv").get_json()["available"]
    assert len(found) > 4
    names = 0
    for table in found:
        answer = yard.ask(f"/v1/jobs/{yard.odd}/tables/{table}.csv")
        if answer.status_code == 404:
            continue
        for row in csv.reader(io.StringIO(answer.text)):
            for cell in row:
                if FORMULA.match(cell):
                    float(cell)  # a number, or ValueError
                names += cell.startswith("'")
    assert names > 10


@pytest.mark.parametrize("name", ["=1+1", "+cmd|' /C calc'!A0", "-2+3", "@SUM(A1)", "\t=1", "\r=1"])
def test_a_name_like_a_formula_is_text(name: str) -> None:
    """The signs are those of common practice against CSV injection."""
    (cell,) = next(csv.reader(io.StringIO(csv_text([[name]]), newline="")))
    assert cell == f"'{name}"


def test_the_names_of_the_odd_job_are_all_in_its_results(yard: Yard) -> None:
    results = yard.ask(f"/v1/jobs/{yard.odd}/results").get_json()
    assert {*results["cases"], *results["combinations"]} == set(NAMES)
    assert set(results["probes"]) == set(NAMES)
