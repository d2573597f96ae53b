"""`fishplate backup`: copy the store to another place, while it is in use."""

from pathlib import Path

import click

from api.commands.layout import size
from api.commands.settings import STORE, store_folder
from api.commands.terminal import FAILED, err, leave
from workers.backup import back_up, forget
from workers.errors import StoreError


@click.command()
@click.argument("folder", type=click.Path(file_okay=False, path_type=Path))
@click.option("--keep", type=click.IntRange(1, 10_000), metavar="RUNS",
              help="Remove all but the newest so many back-ups; without it all stay.")  # fmt: skip
@STORE
def command(folder: Path, keep: int | None, store: Path | None) -> None:
    """Add a back-up of the whole store to FOLDER, which should be on another disk or machine.

    The server may run. Finished jobs are copied once and listed again by later back-ups; unfinished
    ones go with their document and begin anew after a restore. Tokens and audit log are in it, so
    FOLDER must be as guarded as the store. Exit status 1 where anything could not be copied.
    """
    console = err()
    try:
        made = back_up(store_folder(store), folder)
        forgotten = forget(folder, keep) if keep else 0
    except StoreError as error:
        leave(FAILED, str(error))
    run = made.run
    console.print(
        f"back-up {run.name} in {folder}: {len(run.jobs)} final jobs ({made.packed} of them new), "
        f"{run.unfinished} unfinished; {size(run.length)}, of which {size(made.written)} are new",
        soft_wrap=True,
    )
    if forgotten:
        console.print(f"{forgotten} older back-ups removed")
    if made.damaged:
        leave(FAILED, "Not in the back-up, because unreadable:",
              [{"parameter": "job", "message": trouble} for trouble in made.damaged])  # fmt: skip
