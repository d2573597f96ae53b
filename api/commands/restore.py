"""`fishplate restore`: bring a back-up into an empty store, or only check it."""

from pathlib import Path

import click

from api.commands.layout import size
from api.commands.settings import STORE, store_folder
from api.commands.terminal import FAILED, err, leave
from workers import layout
from workers.errors import StoreError
from workers.restore import choose, restore, verify


@click.command()
@click.argument("folder", type=click.Path(file_okay=False, exists=True, path_type=Path))
@click.option("--run", "name", metavar="NAME", help="Which back-up; the newest, if not given.")
@click.option("--check", is_flag=True, help="Read every file and compare it with its SHA-256; "
              "restore nothing.")  # fmt: skip
@STORE
def command(folder: Path, name: str | None, check: bool, store: Path | None) -> None:
    """Restore a back-up from FOLDER, as `fishplate backup` has made it, into an empty store.

    Every file is checked before anything is written; a back-up with a damaged file is refused, and
    the file named. Jobs that were unfinished are worked on when the server starts.
    """
    console = err()
    root = store_folder(store)
    try:
        run = choose(folder, name)
        if check:
            verify(folder, run)
            console.print(
                f"back-up {run.name}, made by {run.by}, is whole: {len(run.jobs)} final and "
                f"{run.unfinished} unfinished jobs, {size(run.length)}",
                soft_wrap=True,
            )
            return
        done = restore(folder, run, root)
    except StoreError as error:
        leave(FAILED, str(error))
    console.print(
        f"back-up {run.name} is restored into {root}: {len(run.jobs)} final jobs, {done.queued} in "
        "line again",
        soft_wrap=True,
    )
    if run.layout < layout.LAYOUT:
        console.print("It is of an older layout; run `fishplate migrate` before the server.")
