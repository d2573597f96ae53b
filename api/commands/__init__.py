"""The `fishplate` command: one module for each subcommand, imported only when it is used.

Exit status: 0 all went well, 1 a job or the command failed, 2 the input is wrong.
"""

from collections.abc import Mapping
from importlib import import_module
from types import MappingProxyType

import click
from click.shell_completion import CompletionItem

COMMANDS: Mapping[str, str] = MappingProxyType(
    {
        "serve": "Run queue, workers and HTTP server on this machine.",
        "work": "Run workers for a queue that runs elsewhere.",
        "solve": "Solve jobs here and now, without server or queue.",
        "submit": "Send jobs to a server, wait for them, fetch their results.",
        "tokens": "Make, list and revoke the tokens that a server asks for.",
        "backup": "Copy the store to another place, while it is in use.",
        "restore": "Bring a back-up into an empty store, or only check it.",
        "migrate": "Bring a store of an older Fishplate to this one's layout.",
        "check": "Read a job and say what was understood; solve nothing.",
        "verify": "Run the reference cases on this installation.",
    }
)


class Commands(click.Group):
    """Finds a subcommand in the module of its name, so that `--help` imports no solver."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        if cmd_name not in COMMANDS:
            return None
        command: click.Command = import_module(f"api.commands.{cmd_name}").command
        return command

    def shell_complete(self, ctx: click.Context, incomplete: str) -> list[CompletionItem]:
        """Subcommands from their list, so that a shell is answered at once; and the options."""
        return [
            *(
                CompletionItem(name, help=words)
                for name, words in COMMANDS.items()
                if name.startswith(incomplete)
            ),
            *click.Command.shell_complete(self, ctx, incomplete),
        ]

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        with formatter.section("Commands"):
            formatter.write_dl(list(COMMANDS.items()))


@click.group(cls=Commands, context_settings={"help_option_names": ["-h", "--help"]})
@click.version_option(package_name="fishplate", message="%(package)s %(version)s")
def main() -> None:
    """Check thin plates loaded in their own plane.

    Every result comes with review cautions. Read them first; a qualified engineer must review
    every job before anything relies on it.

    `fishplate COMMAND --help` says more. Exit status: 0 all went well, 1 a job or the command
    failed, 2 the input is wrong.
    """
