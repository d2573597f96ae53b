"""`fishplate migrate`: bring a store to the layout that this Fishplate works with."""

from pathlib import Path

import click

from api.commands.settings import STORE, store_folder
from api.commands.terminal import FAILED, err, leave
from workers.errors import StoreError
from workers.migrations import migrate


@click.command()
@STORE
def command(store: Path | None) -> None:
    """Bring a store that an older Fishplate has written to the layout of this one.

    Wants every `fishplate serve` and `fishplate work` on the store stopped, on all machines. Make a
    back-up first (`fishplate backup`). May be interrupted and repeated; changes nothing where there
    is nothing to do.
    """
    root = store_folder(store)
    try:
        done = migrate(root)
    except StoreError as error:
        leave(FAILED, str(error))
    console = err()
    if done.before == done.after:
        console.print(f"{root} has layout {done.after} already; nothing to do.", soft_wrap=True)
    else:
        console.print(
            f"{root} has layout {done.after} now (it had {done.before}), with {done.jobs} jobs.",
            soft_wrap=True,
        )
    for trouble in done.damaged:
        console.print(f"left as it was: {trouble}", style="yellow", soft_wrap=True)
