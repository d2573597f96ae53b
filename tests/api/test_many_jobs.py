"""`fishplate solve` and `submit` with several documents: each by itself, told together."""

import io
import json
import re
from collections.abc import Callable, Iterator
from dataclasses import replace
from pathlib import Path
from types import SimpleNamespace
from typing import Any

import pytest
from click.testing import CliRunner, Result
from flask import Flask
from rich.console import Console
from rich.control import strip_control_codes

from api.app import create_app
from api.commands import client as client_module
from api.commands import following, main, solve, terminal
from api.commands.client import Client, ServerError
from api.commands.documents import gather, result_folders
from api.commands.layout import print_table
from api.commands.terminal import Many
from api.services import KEY, Services
from tests.dying import crash_if_odd
from tests.job_documents import strip
from tests.served import served
from workers.record import FAILED, RUNNING
from workers.settings import Settings

ANSI = re.compile(r"\x1b\[[0-9;?]*[A-Za-z]")  # ECMA-48, 5.4


def run(*arguments: str | Path) -> Result:
    return CliRunner().invoke(main, [str(argument) for argument in arguments])


@pytest.fixture
def yard(tmp_path: Path) -> Path:
    """A folder of documents: two strips, one of patches, the other an outline that is pulled
    beyond yield; and a wrong one.
    """
    folder = tmp_path / "yard"
    folder.mkdir()
    write(folder / "a.json", {**strip(), "requests": {"convergence": True}})
    overloaded = {**strip(force=128_000), "title": "Overloaded strip"}
    corners = ([0, 0], None), ([100, 0], "right"), ([100, 40], None), ([0, 40], "left")
    loop = [{"at": at, **({"side": side} if side else {})} for at, side in corners]
    write(
        folder / "b.json",
        {**overloaded, "geometry": {"outline": loop, "points": {"corner": [0, 0]}}},
    )
    write(folder / "c.json", {**strip(), "title": "Loose strip", "supports": []})
    (folder / "notes.txt").write_text("no job")
    return folder


def write(path: Path, document: dict[str, Any]) -> None:
    path.write_text(json.dumps(document))


def rows(text: str) -> dict[str, list[str]]:
    """Words of each line that begins with the name of a document."""
    lines = [line.split() for line in text.splitlines()]
    return {words[0]: words for words in lines if words and words[0] in ("a", "b", "c", "d", "e")}


# --- which documents ---------------------------------------------------------------------------


def test_a_folder_stands_for_its_documents_each_named_once(yard: Path) -> None:
    found = gather([yard / "b.json", yard])
    assert [document.name for document in found] == ["b", "a", "c"]


def test_documents_of_one_name_are_told_apart_by_their_folders(tmp_path: Path) -> None:
    paths = [tmp_path / place / "job.json" for place in ("dock", "slip")]
    for path in paths:
        path.parent.mkdir()
        path.touch()
    assert [document.name for document in gather(paths)] == ["dock/job", "slip/job"]
    folders = result_folders(gather(paths), tmp_path / "out").values()
    assert [folder.relative_to(tmp_path).as_posix() for folder in folders] == [
        "out/dock/job", "out/slip/job",
    ]  # fmt: skip


def test_results_of_one_document_never_lie_among_those_of_another(yard: Path) -> None:
    (yard / "a").mkdir()
    write(yard / "a" / "deep.json", strip())
    result = run("solve", yard / "a.json", yard / "a", "--out", yard / "out")
    assert result.exit_code == 2
    assert "two commands" in " ".join(result.stderr.split())


def test_a_folder_without_documents_is_an_error(tmp_path: Path) -> None:
    result = run("solve", tmp_path)
    assert result.exit_code == 2
    assert "no job document" in " ".join(result.stderr.split())


# --- solve -------------------------------------------------------------------------------------


@pytest.mark.slow
def test_jobs_of_a_folder_are_solved_whatever_becomes_of_one(
    yard: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """32 and 128 kN on 40 x 8 mm: 100 and 400 MPa, 28 % and 113 % of 355 MPa. Beside them a wrong
    document, one that meets a fault of the program, and one over which the process is killed.
    """
    monkeypatch.setattr(solve, "attempt", crash_if_odd)
    for name in ("d", "e"):
        write(yard / f"{name}.json", {**strip(), "title": "Odd strip"})
    result = run("solve", yard, "--pictures", "0")
    assert result.exit_code == 1
    table = rows(result.stdout)
    assert {"100", "MPa", "28%", "finished"} <= set(table["a"])
    assert {"400", "MPa", "113%", "stop"} <= set(table["b"])
    assert table["c"][-1] == "wrong"
    assert table["d"][-1] == table["e"][-1] == "failed"
    words = " ".join(result.stdout.split())
    assert "qualified engineer" in words
    assert "stop b: In 'pull' the von Mises stress reaches 400 MPa" in words
    assert "5 jobs: 2 finished, 1 wrong, 2 failed; the highest use of yield is 113%, in b" in words
    assert "/supports" in result.stderr
    assert "Fishplate itself failed here (TypeError" in result.stderr
    assert "ended without a result (SIGSEGV)" in result.stderr
    assert "5 of 5" in result.stderr
    assert {path.name for path in yard.glob("*-results")} == {"a-results", "b-results"}
    assert (yard / "b-results" / "sheet.html").is_file()
    # With all that results ever consist of, they are replaced.
    again = run("solve", yard / "a.json", "--pictures", "0")
    assert again.exit_code == 0
    assert (yard / "a-results" / "convergence.png").is_file()
    assert "sheet.html" in again.stderr


def test_where_only_documents_are_wrong_the_status_is_two(yard: Path, tmp_path: Path) -> None:
    write(yard / "a.json", {})
    (yard / "b.json").write_text("{")
    result = run("solve", yard, "--out", tmp_path / "out")
    assert result.exit_code == 2
    assert [row[-1] for row in rows(result.stdout).values()] == ["wrong"] * 3
    assert not (tmp_path / "out" / "a").exists()


# --- submit ------------------------------------------------------------------------------------


@pytest.fixture
def url(app: Flask) -> Iterator[str]:
    with served(app) as address:
        yield address


def jobs_of(app: Flask) -> list[str]:
    services: Services = app.extensions[KEY]
    return [record.title for record in services.store.list().records]


def test_documents_are_sent_once_however_often_the_command_is_repeated(
    yard: Path, url: str, app: Flask
) -> None:
    """The wrong one is refused, and does not keep the others out."""
    first, second = (run("submit", yard, "--url", url) for _ in range(2))
    assert first.exit_code == second.exit_code == 2
    assert first.stdout == second.stdout
    assert [line.split()[1] for line in first.stdout.splitlines()] == ["a", "b"]
    assert sorted(jobs_of(app)) == ["Overloaded strip", "Slipway tie strip"]
    assert "/supports" in first.stderr
    assert "2 of 3 were known already" in second.stderr
    assert run("submit", yard, "--url", url, "--anew").exit_code == 2
    assert len(jobs_of(app)) == 4


def test_one_document_is_sent_once_too(yard: Path, url: str, app: Flask) -> None:
    first, second, anew = (
        run("submit", yard / "a.json", "--url", url, *more) for more in ([], [], ["--anew"])
    )
    assert first.stdout == second.stdout != anew.stdout
    assert "known already" in second.stderr
    assert len(jobs_of(app)) == 2


def test_each_job_that_is_waited_for_has_a_line_and_a_folder_of_its_own(
    yard: Path, url: str, app: Flask, finish: Callable[[str], None], tmp_path: Path
) -> None:
    services: Services = app.extensions[KEY]
    run("submit", yard, "--url", url)
    for record in services.store.list().records:
        if record.title.startswith("Overloaded"):
            services.store.transition(record.id, RUNNING)
            services.store.transition(record.id, FAILED, reason="out of time")
        else:
            finish(record.id)
    result = run("submit", yard, "--url", url, "--out", tmp_path / "out")
    assert result.exit_code == 1
    states = {name: words[-1] for name, words in rows(result.stdout).items()}
    assert states == {"a": "finished", "b": "failed", "c": "wrong"}
    assert "out of time" in result.stderr
    assert json.loads((tmp_path / "out" / "a" / "results.json").read_bytes())["cases"]
    assert [path.name for path in (tmp_path / "out").iterdir()] == ["a"]


def test_jobs_are_told_in_the_order_in_which_they_end(
    yard: Path, url: str, app: Flask, finish: Callable[[str], None]
) -> None:
    """The second ends while the first is still in line."""
    run("submit", yard, "--url", url)
    client, (b, a) = Client(url), app.extensions[KEY].store.list().records
    documents = gather([yard / "a.json", yard / "b.json"])
    sent = list(zip(documents, (client.job(a.id, 0), client.job(b.id, 0)), strict=True))
    finish(b.id)
    ended = []
    for document, job in following.follow_all(client, sent, Many(2, None)):
        ended.append(document.name)
        assert job["state"] == "finished"
        if document.name == "b":
            finish(a.id)
    assert ended == ["b", "a"]


def test_a_server_that_has_too_much_to_do_is_waited_for(
    settings: Settings, yard: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Three submissions a minute are let in; here a minute passes at once."""
    app = create_app(replace(settings, submit_rate="3/minute"))
    services: Services = app.extensions[KEY]
    pauses = []

    def sleep(seconds: float) -> None:
        pauses.append(seconds)
        services.queue.connection.flushall()

    monkeypatch.setattr(client_module, "time", SimpleNamespace(sleep=sleep))
    token = services.tokens.add("ana", "submit")[1]
    for number in range(6):
        write(yard / f"a{number}.json", {**strip(), "title": f"Strip {number}"})
    with served(app) as url:
        result = run("submit", yard, "--url", url, "--token", token)
    services.queue.connection.flushall()
    services.queue.connection.close()
    assert len(jobs_of(app)) == 8
    assert len(pauses) >= 2
    assert all(1 <= seconds <= 60 for seconds in pauses)
    assert "asks to wait" in result.stderr


def test_what_was_sent_is_told_when_the_server_goes_away(
    yard: Path, url: str, app: Flask, monkeypatch: pytest.MonkeyPatch
) -> None:
    submit = Client.submit

    def submit_once(client: Client, *args: Any) -> Any:
        if jobs_of(app):
            raise ServerError("it is gone.")
        return submit(client, *args)

    monkeypatch.setattr(Client, "submit", submit_once)
    result = run("submit", yard, "--url", url)
    assert result.exit_code == 1
    assert "1 of 3 documents were accepted" in result.stderr
    assert "not sent twice" in result.stderr
    assert result.stdout.split()[1:] == ["a"]


# --- progress ----------------------------------------------------------------------------------


@pytest.fixture
def seen(monkeypatch: pytest.MonkeyPatch) -> io.StringIO:
    """What a person at a terminal of 80 columns gets to see."""
    shown = io.StringIO()
    console = Console(file=shown, force_terminal=True, width=80, highlight=False)
    monkeypatch.setattr(terminal, "err", lambda: console)
    return shown


def test_one_bar_shows_how_far_hundreds_are(seen: io.StringIO) -> None:
    with terminal.progress_of_many(300) as many:
        many.now("dock/lug")("solving", 0.5)
        many.done("dock/lug  finished")
        many.note("the server asks to wait")
        many.now("a-name-that-is-longer-than-the-line-" * 3)("meshing", 0.0)
    lines = [strip_control_codes(ANSI.sub("", part)) for part in seen.getvalue().split("\r")]
    assert "1 of 300" in "".join(lines)
    assert all(len(line.strip()) <= 80 for line in lines)


def test_a_bar_shows_the_stage_of_a_single_job(seen: io.StringIO) -> None:
    with terminal.progress() as report:
        report("factorising", 0.0)
    assert "33%" in seen.getvalue()  # the fourth of nine stages begins
    assert "factorising" in seen.getvalue()


def test_where_there_is_no_terminal_each_job_has_a_line(capsys: pytest.CaptureFixture[str]) -> None:
    with terminal.progress_of_many(2) as many:
        many.now("a")("solving", 0.5)
        many.done("a  finished")
        many.note("wait")
        many.done("b  failed")
    assert capsys.readouterr().err.splitlines() == [
        "1 of 2  a  finished",
        "wait",
        "2 of 2  b  failed",
    ]


# --- tables ------------------------------------------------------------------------------------


def test_numbers_stay_whole_where_a_table_is_narrow(capsys: pytest.CaptureFixture[str]) -> None:
    """Words are broken or, in the column that is said, cut off; never numbers."""
    console = Console(width=60, highlight=False)
    print_table(
        console, "Jobs", ("job", "title", "peak"),
        [("a", "A title that is far too long for the line that it stands in", "304.88 MPa")],
        words=2, cut="title",
    )  # fmt: skip
    lines = capsys.readouterr().out.splitlines()
    assert all(len(line.rstrip()) <= 60 for line in lines)
    row = lines[-1]
    assert "304.88 MPa" in row
    assert "…" in row
