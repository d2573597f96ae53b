"""The `fishplate` command: exit statuses, and what it prints."""

import dataclasses
import json
import threading
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import pytest
from click.testing import CliRunner, Result
from flask import Flask

from api.commands import COMMANDS, main
from api.commands.client import Client
from api.commands.folders import replaced
from api.commands.layout import number
from api.services import KEY
from tests.job_documents import strip
from tests.served import served
from workers.errors import Fault
from workers.record import FAILED, RUNNING
from workers.settings import Settings


def run(*arguments: str | Path) -> Result:
    return CliRunner().invoke(main, [str(argument) for argument in arguments])


@pytest.fixture
def job(tmp_path: Path) -> Path:
    path = tmp_path / "strip.json"
    path.write_text(json.dumps(strip()))
    return path


@pytest.fixture
def url(app: Flask) -> Iterator[str]:
    with served(app) as address:
        yield address


@pytest.fixture
def work(app: Flask) -> Iterator[Callable[[Callable[[str], None]], None]]:
    """Do something with the first job that is accepted, as a worker would."""
    threads = []

    def start(do: Callable[[str], None]) -> None:
        def look() -> None:
            store = app.extensions[KEY].store
            while not (accepted := store.list().records):
                if stop.wait(0.01):
                    return
            do(accepted[0].id)

        threads.append(threading.Thread(target=look))
        threads[-1].start()

    stop = threading.Event()
    yield start
    stop.set()
    for thread in threads:
        thread.join()


def test_help_names_every_command_without_loading_the_solver() -> None:
    result = run("--help")
    assert result.exit_code == 0
    assert all(name in result.output for name in COMMANDS)


@pytest.mark.parametrize("name", COMMANDS)
def test_every_command_has_help(name: str) -> None:
    assert run(name, "--help").exit_code == 0


@pytest.mark.parametrize(
    ("value", "text"),
    [(210000.0, "210000"), (0.1 + 0.2, "0.3"), (-25.97841, "-25.978"), (0.0, "0"),
     (1.23456e-7, "1.2346e-07"), (6.02214e23, "6.0221e+23")],
)  # fmt: skip
def test_numbers_are_shown_with_five_digits(value: float, text: str) -> None:
    assert number(value) == text


# --- check ---------------------------------------------------------------------------------------


def test_check_says_what_was_understood(job: Path) -> None:
    """Hand sums: 100 x 40 mm; 5 x 2 Q8 have 11 x 3 + 6 x 2 = 45 nodes; 32 kN on the right."""
    result = run("check", job)
    assert result.exit_code == 0
    for text in ("100 x 40 mm", "45 nodes, 10 Q8", "8 mm of steel", "ux = 0", "32000"):
        assert text in result.output
    assert "qualified engineer" in " ".join(result.output.split())


def test_check_lists_all_faults_and_ends_with_two(job: Path) -> None:
    document = strip()
    document["plate"]["thickness"] = 0
    document["load_cases"]["pull"][0]["on"] = "nowhere"
    job.write_text(json.dumps(document))
    result = run("check", job)
    assert result.exit_code == 2
    assert "/plate/thickness" in result.stderr
    assert "/load_cases/pull/0/on" in result.stderr


# --- submit --------------------------------------------------------------------------------------


def test_submit_without_wait_prints_the_id(job: Path, url: str, app: Flask) -> None:
    result = run("submit", job, "--url", url)
    assert result.exit_code == 0
    assert (result.stdout.strip(),) == app.extensions[KEY].store.unfinished()


def test_submit_waits_prints_the_summary_and_fetches_every_file(
    job: Path,
    url: str,
    work: Callable[..., None],
    finish: Callable[[str], None],
    tmp_path: Path,
) -> None:
    work(finish)
    folder = tmp_path / "results"
    result = run("submit", job, "--url", url, "--out", folder)
    assert result.exit_code == 0
    assert "Something was noticed." in result.stdout
    assert "± 0.5" in result.stdout
    assert json.loads((folder / "results.json").read_bytes())["cases"]["pull"]
    assert (folder / "fields" / "pull.vtu").read_bytes() == b"fields/pull.vtu"
    assert (folder / "previews" / "pull" / "model.png").is_file()
    assert (folder / "sheet.html").read_bytes() == b"sheet.html"
    assert (folder / "tables" / "peaks.csv").read_text().startswith("case,quantity,")
    assert (folder / "lines" / "axis.png").read_bytes() == b"lines/axis.png"


def test_submit_ends_with_one_and_the_reason_when_the_job_fails(
    job: Path, url: str, work: Callable[..., None], app: Flask
) -> None:
    def fail(job_id: str) -> None:
        store = app.extensions[KEY].store
        store.transition(job_id, RUNNING)
        fault = Fault("/supports", "part 1 can rotate")
        store.transition(job_id, FAILED, reason="free to move", faults=(fault,))

    work(fail)
    result = run("submit", job, "--url", url, "--wait")
    assert result.exit_code == 1
    assert "free to move" in result.stderr
    assert "part 1 can rotate" in result.stderr


def test_submit_ends_with_two_and_the_faults_when_the_document_is_wrong(
    job: Path, url: str
) -> None:
    job.write_text("{}")
    result = run("submit", job, "--url", url)
    assert result.exit_code == 2
    assert "/geometry" in result.stderr


@pytest.mark.parametrize(
    ("url", "status"), [("http://127.0.0.1:1", 1), ("file:///etc", 2), ("nonsense", 2)]
)
def test_submit_says_when_there_is_no_server(job: Path, url: str, status: int) -> None:
    result = run("submit", job, "--url", url)
    assert result.exit_code == status
    assert url in result.stderr


def test_a_large_document_is_sent_packed(job: Path, url: str, app: Flask) -> None:
    document: dict[str, Any] = {**strip(), "title": "x" * 200}
    job.write_text(json.dumps(document) + " " * 90_000)
    result = run("submit", job, "--url", url)
    assert app.extensions[KEY].store.document(result.stdout.strip()) == job.read_bytes()


def test_submit_may_ask_for_the_line_of_bulk(job: Path, url: str, app: Flask) -> None:
    result = run("submit", job, "--url", url, "--priority", "bulk")
    assert app.extensions[KEY].store.record(result.stdout.strip()).priority == "bulk"


# --- tokens --------------------------------------------------------------------------------------


@pytest.fixture
def store(app: Flask) -> str:
    return str(app.extensions[KEY].settings.store)


def test_a_token_made_by_the_command_opens_a_running_server(
    job: Path, url: str, app: Flask, store: str
) -> None:
    """The server is the one that was already running; the token is printed alone, for scripts."""
    made = run("tokens", "add", "ana", "--role", "submit", "--workspace", "dock", "--store", store)
    assert made.exit_code == 0
    token = made.stdout.strip()
    refused = run("submit", job, "--url", url)
    assert refused.exit_code == 2
    assert "A token is needed" in refused.stderr
    for given in (["--token", token], []):
        sent = CliRunner(env={"FISHPLATE_TOKEN": token}).invoke(
            main, ["submit", str(job), "--url", url, *given]
        )
        assert sent.exit_code == 0
    record = app.extensions[KEY].store.record(sent.stdout.strip())
    assert (record.owner, record.workspace) == ("ana", "dock")


def test_tokens_are_listed_without_their_secrets_and_revoked_by_name(store: str) -> None:
    token = run("tokens", "add", "ana", "--role", "read", "--expires", "9", "--store", store)
    secret = token.stdout.strip().rsplit("_", 1)[1]
    listed = run("tokens", "list", "--store", store).stdout
    assert "ana" in listed
    assert "until" in listed
    assert secret not in listed
    assert run("tokens", "revoke", "ana", "--store", store).exit_code == 0
    assert "revoked" in run("tokens", "list", "--store", store).stdout
    assert run("tokens", "revoke", "ana", "--store", store).exit_code == 2


@pytest.mark.parametrize(
    "wrong", [["a b", "--role", "read"], ["ana"], ["ana", "--role", "root"],
              ["ana", "--role", "read", "--workspace", "../x"],
              ["ana", "--role", "read", "--expires", "0"]],
)  # fmt: skip
def test_a_token_that_cannot_be_is_refused(store: str, wrong: list[str]) -> None:
    assert run("tokens", "add", *wrong, "--store", store).exit_code == 2
    assert "Tokens" in run("tokens", "list", "--store", store).stdout


def test_what_the_command_did_is_in_the_audit_log(store: str) -> None:
    run("tokens", "add", "ana", "--role", "read", "--store", store)
    run("tokens", "revoke", "ana", "--store", store)
    (path,) = Path(store, "audit").iterdir()
    entries = [json.loads(line) for line in path.read_text().splitlines()]
    assert [entry["action"] for entry in entries] == ["token added", "token revoked"]
    assert all(entry["who"] and entry["name"] == "ana" for entry in entries)


def test_serve_beyond_this_machine_says_what_to_do_first(store: str) -> None:
    result = run("serve", "--host", "0.0.0.0", "--port", "0", "--store", store)
    assert result.exit_code == 2
    assert "fishplate tokens add" in " ".join(result.stderr.split())


def test_serve_help_lists_every_setting() -> None:
    """As the README says."""
    listed = run("serve", "--help").stdout
    assert all(f"FISHPLATE_{f.name.upper()} " in listed for f in dataclasses.fields(Settings))


@pytest.mark.parametrize(
    ("url", "shown"),
    [("http://plates.example", True), ("https://plates.example", False),
     ("http://127.0.0.1:8470", False)],
)  # fmt: skip
def test_a_token_that_others_can_read_on_the_way_is_noticed(url: str, shown: bool) -> None:
    assert Client(url, "secret").shows_token is shown
    assert not Client(url).shows_token


# --- solve ---------------------------------------------------------------------------------------


@pytest.mark.slow
def test_solve_writes_and_prints_the_known_answer(job: Path, tmp_path: Path) -> None:
    """The strip: 32000 N / (40 mm x 8 mm) = 100 MPa, 100 / 355 = 28 % of yield."""
    result = run("solve", job, "--pictures", "0")
    assert result.exit_code == 0
    folder = tmp_path / "strip-results"
    peak = json.loads((folder / "results.json").read_bytes())["cases"]["pull"]["von_mises"]
    assert peak["value"] == pytest.approx(100.0)
    assert (folder / "fields" / "pull.vtu").is_file()
    printed = result.stdout.splitlines()
    row = next(line.split() for line in printed if line.startswith("pull "))
    assert row[:2] == ["pull", "100"]
    assert "28%" in row
    assert any("-32000" in line for line in printed)


@pytest.mark.slow
def test_solve_ends_with_two_where_the_document_is_wrong(job: Path, tmp_path: Path) -> None:
    job.write_text(json.dumps({**strip(), "supports": [{"on": "left", "uy": 0}]}))
    result = run("solve", job)
    assert result.exit_code == 2
    assert "/supports" in result.stderr
    assert not (tmp_path / "strip-results").exists()


# --- folders -------------------------------------------------------------------------------------


@pytest.mark.parametrize("command", [["solve"], ["submit", "--url", "http://127.0.0.1:1"]])
def test_results_never_replace_a_folder_of_something_else(
    job: Path, tmp_path: Path, command: list[str]
) -> None:
    folder = tmp_path / "mine"
    folder.mkdir()
    (folder / "letter.txt").write_text("dear")
    (folder / "results.json").write_text("{}")
    result = run(*command, job, "--out", folder)
    assert result.exit_code == 2
    assert (folder / "letter.txt").read_text() == "dear"


def test_new_results_replace_old_ones_as_a_whole(tmp_path: Path) -> None:
    folder = tmp_path / "results"
    for name in ("old", "new"):
        with replaced(folder) as fresh:
            (fresh / name).touch()
    assert [path.name for path in folder.iterdir()] == ["new"]
    assert [path.name for path in tmp_path.iterdir()] == ["results"]


def test_old_results_stay_when_new_ones_fail(tmp_path: Path) -> None:
    folder = tmp_path / "results"
    with replaced(folder) as fresh:
        (fresh / "old").touch()
    with pytest.raises(RuntimeError), replaced(folder):
        raise RuntimeError
    assert [path.name for path in folder.iterdir()] == ["old"]
