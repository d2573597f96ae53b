"""`fishplate submit`: a job to a server, and its results back."""

import time
import uuid
from pathlib import Path
from typing import Any
from urllib.parse import quote

import click

from api.commands.client import Client, ServerError
from api.commands.folders import RESULTS, name_files, refuse_foreign, replaced
from api.commands.report import print_results
from api.commands.terminal import BAD_INPUT, FAILED, err, leave, out, progress
from workers.outputs.names import SHEET, file_name
from workers.record import CANCELLED, FINISHED, PRIORITIES, UNFINISHED

PAUSE = 0.25  # shortest time between two looks at a job [s]


@click.command()
@click.argument("job", type=click.Path(exists=True, dir_okay=False, path_type=Path))
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
@click.option("--priority", type=click.Choice(PRIORITIES), help="Line that the job should wait in.")
@click.option("--wait", is_flag=True, help="Wait for the job and print its results.")
@click.option(
    "--out",
    "folder",
    type=click.Path(file_okay=False, path_type=Path),
    help="Fetch review sheet, results, tables, fields and pictures into this folder (implies "
    "--wait).",
)
def command(
    job: Path,
    url: str,
    token: str | None,
    priority: str | None,
    wait: bool,
    folder: Path | None,
) -> None:
    """Send the job document JOB to a server.

    Prints the address of the job; with --wait also the summary of its results.
    """
    if folder:
        refuse_foreign(folder)
    try:
        client = Client(url, token)
        if client.shows_token:
            err().print("[yellow]The token travels unencrypted; use https.[/yellow]")
        accepted = client.submit(job.read_bytes(), key=str(uuid.uuid4()), priority=priority)
        here = client.url.rstrip("/") + accepted["links"]["self"]
        err().print(f"accepted: {here}", soft_wrap=True)
        if not (wait or folder):
            out().print(accepted["id"])
            return
        final = follow(client, accepted)
        _leave_unless_finished(final)
        results = client.results(final["id"])
        if folder:
            with replaced(folder) as fresh:
                fetch_files(client, final["links"]["self"], results, fresh)
            name_files(folder)
    except ServerError as error:
        # 429 is nothing wrong with the job: the same may be sent later.
        bad = error.status is not None and 400 <= error.status < 500 and error.status != 429
        leave(BAD_INPUT if bad else FAILED, str(error), error.errors)
    print_results(out(), results)


def follow(client: Client, job: dict[str, Any]) -> dict[str, Any]:
    """Wait until the job is final, showing where it is."""
    with progress() as report:
        while job["state"] in UNFINISHED:
            now = job["progress"] or {"stage": job["state"], "fraction": 0.0}
            report(now["stage"], now["fraction"])
            asked = time.monotonic()
            job = client.job(job["id"], wait=1)  # a person watches: no stage should go unseen long
            # A busy server may answer at once instead of holding the request.
            if job["state"] in UNFINISHED:
                time.sleep(max(0.0, PAUSE - (time.monotonic() - asked)))
    return job


def _leave_unless_finished(job: dict[str, Any]) -> None:
    if job["state"] != FINISHED:
        what = "was cancelled" if job["state"] == CANCELLED else "failed"
        leave(FAILED, f"The job {what}: {job['reason'] or 'see the faults'}", job["errors"])


def fetch_files(client: Client, here: str, results: dict[str, Any], folder: Path) -> None:
    """Fetch the results and every file that was made with the job."""
    client.fetch(f"{here}/results", folder / RESULTS)
    client.fetch(f"{here}/sheet", folder / SHEET)
    for table in results["files"]["tables"]:
        target = folder / "tables" / f"{file_name(table)}.csv"
        client.fetch(f"{here}/tables/{quote(table, safe='')}.csv", target)
    # Names go into addresses and file names by our own rules; paths in an answer are not followed.
    for case in results["files"]["fields"]:
        target = folder / "fields" / f"{file_name(case)}.vtu"
        client.fetch(f"{here}/fields/{quote(case, safe='')}.vtu", target)
    for case, pictures in results["files"]["previews"].items():
        for quantity in pictures:
            target = folder / "previews" / file_name(case) / f"{file_name(quantity)}.png"
            client.fetch(f"{here}/previews/{quote(case, safe='')}/{quote(quantity)}.png", target)
    made = results["files"]["envelope"]
    names = [f"{measure}.png" for measure in made["previews"]]
    for name in [*names, "fields.vtu"] if "fields" in made else names:
        target = folder / "envelope" / file_name(name)
        client.fetch(f"{here}/envelope/{quote(name, safe='')}", target)
    for line in results["files"]["lines"]:
        target = folder / "lines" / f"{file_name(line)}.png"
        client.fetch(f"{here}/lines/{quote(line, safe='')}.png", target)
