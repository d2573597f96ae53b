"""Settings of a command: those of the environment, with what the command line says on top."""

import os
import pwd
from dataclasses import replace
from pathlib import Path
from typing import Any

import click

from api.commands.terminal import BAD_INPUT, leave
from workers.errors import SettingsError
from workers.settings import Settings


def settings_with(**given: Any) -> Settings:
    """Options that were not given (None) leave the environment's value as it is."""
    try:
        settings = Settings.from_environment()
    except SettingsError as error:
        leave(BAD_INPUT, str(error))
    return replace(settings, **{name: value for name, value in given.items() if value is not None})


STORE = click.option(
    "--store", type=click.Path(file_okay=False, path_type=Path), help="Folder of the jobs."
)


def store_folder(store: Path | None) -> Path:
    """The folder that `--store` names, or the setting; not another user's when we are root.

    What root wrote there, the user of the server could not read: nobody would be let in any more.
    """
    folder = settings_with(store=store.absolute() if store else None).store
    owner = folder.stat().st_uid if folder.is_dir() else os.geteuid()
    if os.geteuid() == 0 and owner != 0:
        leave(BAD_INPUT, f"The store {folder} is of {_name(owner)}; run this as that user.")
    return folder


def _name(owner: int) -> str:
    try:
        return f"the user {pwd.getpwuid(owner).pw_name}"
    except KeyError:
        return f"user number {owner}"
