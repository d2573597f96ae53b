"""`fishplate solve`: jobs in the foreground, one after the other, without server or queue."""

from pathlib import Path
from typing import Any

import click

from api.commands.apart import ProcessDiedError, apart
from api.commands.documents import (
    Document,
    DocumentPath,
    beside,
    gather,
    is_single,
    result_folders,
)
from api.commands.folders import name_files, refuse_foreign, replaced
from api.commands.outcomes import (
    NOT_BEGUN,
    WRONG,
    Outcome,
    exit_status,
    finished,
    print_outcomes,
    print_troubles,
    title_of,
)
from api.commands.report import print_results
from api.commands.terminal import (
    BAD_INPUT,
    FAILED,
    Report,
    err,
    leave,
    out,
    progress,
    progress_of_many,
)
from elements.errors import FishplateError
from workers import record
from workers.errors import DocumentError, FaultyError

DOCUMENT_WRONG = "The job document is wrong; nothing was solved."


@click.command()
@click.argument("jobs", nargs=-1, required=True, type=DocumentPath(folders=True), metavar="JOB...")
@click.option(
    "--out",
    "folder",
    type=click.Path(file_okay=False, path_type=Path),
    help="Folder for the results, where there are several jobs with a folder in it for each. "
    "Without it they go beside each document, into JOB-results.",
)
@click.option("--pictures", default=6, show_default=True, type=click.IntRange(0, 1000),
              help="How many pictures to draw of each job.")  # fmt: skip
def command(jobs: tuple[Path, ...], folder: Path | None, pictures: int) -> None:
    """Solve job documents without server or queue.

    Each JOB is a job document, or a folder: then every *.json in it is one. Writes the review sheet
    (sheet.html), results.json, tables/*.csv, fields/*.vtu and previews/*/*.png of each. A folder
    with earlier results is replaced as a whole, so that old and new files never mix.

    One job prints its cautions, peaks and reactions; several print a line each, and one that fails
    does not stop the others.

    Ends with 0 when every job is finished; with 2 when documents are wrong and everything else
    is finished; with 1 when a job failed.

    \b
    For example:
      fishplate solve plate.json
      fishplate solve plates/ --out results
      fishplate solve yard/*.json dock/*.json --pictures 0
    """
    if is_single(jobs):
        solve_one(jobs[0], folder or beside(jobs[0]), pictures)
    else:
        solve_many(gather(jobs), folder, pictures)


def solve_one(document: Path, folder: Path, pictures: int) -> None:
    """Solve a job and print what an engineer wants to see first."""
    refuse_foreign(folder)
    try:
        with progress() as report, replaced(folder) as fresh:
            results = _solve(document, fresh, pictures, report)
    except FaultyError as error:
        faults = [fault.as_json() for fault in error.faults]
        if isinstance(error, DocumentError):
            leave(BAD_INPUT, DOCUMENT_WRONG, faults)
        leave(FAILED, "The job failed.", faults)
    except (FishplateError, OSError, MemoryError) as error:
        leave(FAILED, f"The job failed: {error or 'out of memory'}")
    print_results(out(), results)
    name_files(folder)


def solve_many(documents: list[Document], out_folder: Path | None, pictures: int) -> None:
    """Solve every job, whatever becomes of the others, and print a line for each."""
    folders = result_folders(documents, out_folder)
    for folder in folders.values():
        refuse_foreign(folder)
    outcomes = {document: Outcome(document, NOT_BEGUN) for document in documents}
    try:
        with progress_of_many(len(documents)) as many:
            for document, folder in folders.items():
                found = _outcome(document, folder, pictures, many.now(document.name))
                outcomes[document] = found
                many.done(found.in_words())
    finally:  # an interrupt too: what is solved is solved
        print_outcomes(out(), list(outcomes.values()))
        print_troubles(outcomes.values())
    where = "beside each document, in JOB-results" if out_folder is None else f"to {out_folder}"
    err().print(f"Written {where}", soft_wrap=True)
    click.get_current_context().exit(exit_status(outcomes.values()))


def _outcome(document: Document, folder: Path, pictures: int, report: Report) -> Outcome:
    """Solve a job in a process of its own, so that nothing that befalls it befalls the others."""
    try:
        with replaced(folder) as fresh:
            found: Outcome = apart(attempt, document, fresh, pictures, report=report)
            if found.state != record.FINISHED:
                raise _UnfinishedError(found)  # leaves earlier results as they are
    except _UnfinishedError as unfinished:
        return unfinished.outcome
    except (ProcessDiedError, OSError) as error:
        return _failed(document, record.FAILED, f"The job failed: {error}")
    return found


class _UnfinishedError(Exception):
    def __init__(self, outcome: Outcome) -> None:
        super().__init__(outcome.state)
        self.outcome = outcome


def attempt(report: Report, document: Document, folder: Path, pictures: int) -> Outcome:
    """Solve a job into an empty folder; whatever goes wrong is told in the outcome."""
    try:
        return finished(document, _solve(document.path, folder, pictures, report))
    except FaultyError as error:
        wrong = isinstance(error, DocumentError)
        return _failed(
            document,
            WRONG if wrong else record.FAILED,
            DOCUMENT_WRONG if wrong else "The job failed.",
            [fault.as_json() for fault in error.faults],
        )
    except (FishplateError, OSError, MemoryError) as error:
        return _failed(document, record.FAILED, f"The job failed: {error or 'out of memory'}")
    except Exception as error:  # noqa: BLE001 - the others are solved all the same
        words = f"Fishplate itself failed here ({type(error).__name__}: {error}); please report it."
        return _failed(document, record.FAILED, words)


def _failed(document: Document, state: str, reason: str, faults: Any = ()) -> Outcome:
    try:
        title = title_of(document.path.read_bytes())
    except OSError:
        title = ""
    return Outcome(document, state, title, reason, faults)


def _solve(document: Path, folder: Path, pictures: int, report: Report) -> dict[str, Any]:
    # Takes seconds to load, for which neither help nor completion should wait.
    from workers import pipeline  # noqa: PLC0415

    content = document.read_bytes()
    return pipeline.run(content, folder, job_id=None, progress=report, pictures=pictures)
