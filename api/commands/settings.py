"""Settings of a command: those of the environment, with what the command line says on top."""

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
    """The folder that `--store` names, or the setting."""
    return settings_with(store=store.absolute() if store else None).store
