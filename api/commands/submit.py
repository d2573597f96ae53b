"""`fishplate submit`: jobs to a server, and their results back."""

from pathlib import Path
from typing import Any

import click

from api.commands.client import Client, ServerError
from api.commands.documents import Document, DocumentPath, gather, is_single, result_folders
from api.commands.fetching import fetch_files
from api.commands.folders import name_files, refuse_foreign, replaced
from api.commands.following import Job, Sent, follow, follow_all, key_of
from api.commands.outcomes import (
    WRONG,
    Outcome,
    exit_status,
    finished,
    print_outcomes,
    print_troubles,
    title_of,
)
from api.commands.report import print_results
from api.commands.terminal import BAD_INPUT, FAILED, err, leave, out, progress_of_many
from workers.record import CANCELLED, FINISHED, PRIORITIES, UNFINISHED

# What a server says about the document, not about who sends it or how much there is to do.
ABOUT_THE_DOCUMENT = frozenset({400, 413, 415, 422})
NOT_TWICE = "Repeat the command to go on: what was accepted is not sent twice."


@click.command()
@click.argument("jobs", nargs=-1, required=True, type=DocumentPath(folders=True), metavar="JOB...")
@click.option(
    "--url",
    default="http://127.0.0.1:8470",
    show_default=True,
    help="Address of the server.",
)
@click.option(
    "--token",
    envvar="FISHPLATE_TOKEN",
    help="Token, where the server wants one; better in FISHPLATE_TOKEN, which other users of this "
    "machine cannot read.",
)
@click.option("--priority", type=click.Choice(PRIORITIES), help="Line that jobs should wait in.")
@click.option("--wait", is_flag=True, help="Wait for the jobs and print what came of them.")
@click.option(
    "--out",
    "folder",
    type=click.Path(file_okay=False, path_type=Path),
    help="Fetch review sheet, results, tables, fields and pictures into this folder, where there "
    "are several jobs into a folder in it for each (implies --wait).",
)
@click.option("--anew", is_flag=True, help="Have documents solved once more that were sent before.")
def command(
    jobs: tuple[Path, ...],
    url: str,
    token: str | None,
    priority: str | None,
    wait: bool,
    folder: Path | None,
    anew: bool,
) -> None:
    """Send job documents to a server.

    Each JOB is a job document, or a folder: then every *.json in it is one. Prints the id of each
    job; with --wait or --out what came of it: one job with its cautions, peaks and reactions,
    several with a line each.

    A document that the server has already is not sent twice: a command that was interrupted can be
    repeated. Where the server has too much to do, waits as long as it asks for.

    Ends with 0 when every job is accepted, or finished where it was waited for; with 2 when
    documents are wrong and everything else went well; with 1 when a job failed, or the server.

    \b
    For example:
      fishplate submit plate.json --wait
      fishplate submit plates/ --out results --url https://plates.example
    """
    try:
        client = Client(url, token)
        if client.shows_token:
            err().print("[yellow]The token travels unencrypted; use https.[/yellow]")
        if is_single(jobs):
            submit_one(client, jobs[0], priority, anew, wait=wait or bool(folder), folder=folder)
        else:
            submit_many(
                client, gather(jobs), priority, anew, wait=wait or bool(folder), out_folder=folder
            )
    except ServerError as error:
        bad = error.status is not None and 400 <= error.status < 500
        leave(BAD_INPUT if bad else FAILED, str(error), error.errors)
    except OSError as error:
        leave(FAILED, str(error))


def submit_one(
    client: Client,
    document: Path,
    priority: str | None,
    anew: bool,
    *,
    wait: bool,
    folder: Path | None,
) -> None:
    """Send a job; if asked for, wait for it, print its results and fetch its files."""
    if folder:
        refuse_foreign(folder)
    client.on_pause = lambda seconds: err().print(_wait_words(seconds))
    content = document.read_bytes()
    job, new = client.submit(content, key_of(content, anew), priority)
    here = client.url.rstrip("/") + job["links"]["self"]
    known = f"known already, {job['state']} (--anew has it solved once more)"
    err().print(f"{'accepted' if new else known}: {here}", soft_wrap=True)
    if not wait:
        out().print(job["id"])
        return
    final = follow(client, job)
    if final["state"] != FINISHED:
        leave(FAILED, _why(final), final["errors"])
    results = _results(client, final, folder)
    print_results(out(), results)
    if folder:
        name_files(folder)


def submit_many(
    client: Client,
    documents: list[Document],
    priority: str | None,
    anew: bool,
    *,
    wait: bool,
    out_folder: Path | None,
) -> None:
    """Send every job, whatever becomes of the others; if asked for, wait for all of them."""
    folders = result_folders(documents, out_folder) if out_folder else {}
    for folder in folders.values():
        refuse_foreign(folder)
    outcomes: dict[Document, Outcome] = {}
    sent: list[Sent] = []
    try:
        _send_all(client, documents, priority, anew, outcomes, sent)
        if wait:
            with progress_of_many(len(sent)) as many:
                client.on_pause = lambda seconds: many.note(_wait_words(seconds))
                for document, job in follow_all(client, sent, many):
                    found = _conclude(client, document, job, folders.get(document))
                    outcomes[document] = found
                    many.done(found.in_words())
    except ServerError as error:
        far = f"{len(sent)} of {len(documents)} documents were accepted."
        raise ServerError(f"{error} {far} {NOT_TWICE}", error.status, error.errors) from error
    finally:  # an interrupt too
        _print(outcomes, sent, wait)
    if out_folder:
        err().print(f"Written to {out_folder}", soft_wrap=True)
    click.get_current_context().exit(exit_status(outcomes.values()))


def _send_all(
    client: Client,
    documents: list[Document],
    priority: str | None,
    anew: bool,
    outcomes: dict[Document, Outcome],
    sent: list[Sent],
) -> None:
    """Adds to `outcomes` what the server says of each, to `sent` what it accepts."""
    known = 0
    with progress_of_many(len(documents)) as many:
        client.on_pause = lambda seconds: many.note(_wait_words(seconds))
        for document in documents:
            content, words = document.path.read_bytes(), ""
            try:
                job, new = client.submit(content, key_of(content, anew), priority)
            except ServerError as error:
                if error.status not in ABOUT_THE_DOCUMENT:
                    raise
                found = Outcome(document, WRONG, title_of(content), str(error), error.errors)
            else:
                sent.append((document, job))
                found = _as_it_is(document, job)
                if not new:
                    known, words = known + 1, ", known already"
            outcomes[document] = found
            many.done(found.in_words() + words)
    if known:
        err().print(f"{known} of {len(documents)} were known already; --anew has them solved once "
                    "more", soft_wrap=True)  # fmt: skip


def _as_it_is(document: Document, job: Job) -> Outcome:
    bad = job["state"] not in (FINISHED, *UNFINISHED)
    reason = _why(job) if bad else ""
    return Outcome(document, job["state"], job["title"], reason, job["errors"])


def _conclude(client: Client, document: Document, job: Job, folder: Path | None) -> Outcome:
    if job["state"] != FINISHED:
        return _as_it_is(document, job)
    return finished(document, _results(client, job, folder))


def _results(client: Client, job: Job, folder: Path | None) -> dict[str, Any]:
    """Results of a finished job; with a folder, all its files as well."""
    results = client.results(job["id"])
    if folder:
        with replaced(folder) as fresh:
            fetch_files(client, job["links"]["self"], results, fresh)
    return results


def _print(outcomes: dict[Document, Outcome], sent: list[Sent], wait: bool) -> None:
    if wait:
        print_outcomes(out(), list(outcomes.values()))
    else:
        for document, job in sent:
            out().print(f"{job['id']}  {document.name}", soft_wrap=True, markup=False)
    print_troubles(outcomes.values())


def _why(job: Job) -> str:
    what = "was cancelled" if job["state"] == CANCELLED else "failed"
    return f"The job {what}: {job['reason'] or 'see the faults'}"


def _wait_words(seconds: float) -> str:
    return f"the server has too much to do and asks to wait {seconds:.0f} s"
