"""Whether the `fishplate` command understands a line, without doing what it says."""

from collections.abc import Sequence

import click

from api.commands import main


def parse(
    arguments: Sequence[str], command: click.Command = main, parent: click.Context | None = None
) -> click.Context:
    """What becomes of the arguments; raises click.ClickException where they would be refused."""
    if not isinstance(command, click.Group):
        return command.make_context(command.name, list(arguments), parent=parent)
    name, *rest = arguments
    context = click.Context(command, parent=parent)
    found = command.get_command(context, name)
    if found is None:
        raise click.UsageError(f"no command {name}")
    return parse(rest, found, context)
