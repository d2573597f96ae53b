"""`fishplate solve`: one job in the foreground, results beside the document."""

from pathlib import Path
from typing import Any

import click

from api.commands.folders import name_files, refuse_foreign, replaced
from api.commands.report import print_results
from api.commands.terminal import BAD_INPUT, FAILED, leave, out, progress
from elements.errors import FishplateError
from workers import pipeline
from workers.errors import DocumentError, FaultyError


@click.command()
@click.argument("job", type=click.Path(exists=True, dir_okay=False, path_type=Path))
@click.option(
    "--out",
    "folder",
    type=click.Path(file_okay=False, path_type=Path),
    help="Folder for the results; JOB-results beside the document if not given.",
)
@click.option("--pictures", default=6, show_default=True, type=click.IntRange(0, 1000),
              help="How many pictures to draw.")  # fmt: skip
def command(job: Path, folder: Path | None, pictures: int) -> None:
    """Solve the job document JOB without server or queue.

    Writes the review sheet (sheet.html), results.json, tables/*.csv, fields/*.vtu and
    previews/*/*.png. A folder with earlier results is replaced as a whole, so that old and new
    files never mix.
    """
    folder = folder or job.with_name(f"{job.stem}-results")
    refuse_foreign(folder)
    with replaced(folder) as fresh:
        results = _solve(job.read_bytes(), fresh, pictures)
    print_results(out(), results)
    name_files(folder)


def _solve(document: bytes, folder: Path, pictures: int) -> dict[str, Any]:
    try:
        with progress() as report:
            return pipeline.run(document, folder, job_id=None, progress=report, pictures=pictures)
    except FaultyError as error:
        faults = [fault.as_json() for fault in error.faults]
        if isinstance(error, DocumentError):
            leave(BAD_INPUT, "The job document is wrong; nothing was solved.", faults)
        leave(FAILED, "The job failed.", faults)
    except (FishplateError, OSError, MemoryError) as error:
        leave(FAILED, f"The job failed: {error or 'out of memory'}")
