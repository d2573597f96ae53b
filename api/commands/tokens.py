"""`fishplate tokens`: who may use a server, on the machine that has its store."""

import getpass
from datetime import timedelta
from pathlib import Path

import click

from api.commands.layout import print_table
from api.commands.settings import STORE, store_folder
from api.commands.terminal import BAD_INPUT, FAILED, err, leave, out
from workers import layout
from workers.audit import TOKEN_ADDED, TOKEN_REVOKED, Audit
from workers.errors import StoreError, TokenError
from workers.record import DEFAULT_WORKSPACE
from workers.tokens import ROLES, Token, Tokens


@click.group()
def command() -> None:
    """Make, list and revoke the tokens with which a server may be used.

    Works on the store itself, so it needs no running server; one that runs takes note at once. As
    soon as a token has been made, every request needs one.
    """


@command.command()
@click.argument("name")
@click.option(
    "--role", type=click.Choice(ROLES), required=True,
    help="read: look at jobs and metrics; submit: also send, cancel, remove and pin jobs; admin: "
    "all that in every workspace.",
)  # fmt: skip
@click.option(
    "--workspace", default=DEFAULT_WORKSPACE, show_default=True,
    help="Whose jobs these are; other workspaces do not see them.",
)  # fmt: skip
@click.option("--expires", type=click.IntRange(1, 3650), metavar="DAYS", help="Days of its life.")
@STORE
def add(name: str, role: str, workspace: str, expires: int | None, store: Path | None) -> None:
    """Make a token for NAME and print it, this once.

    Only a digest is kept: a token that is lost cannot be shown again, but revoked and replaced.
    """
    root = _root(store)
    lifetime = None if expires is None else timedelta(days=expires)
    try:
        token, text = Tokens(root).add(name, role, workspace, lifetime)
    except TokenError as error:
        leave(BAD_INPUT, str(error))
    except StoreError as error:
        leave(FAILED, str(error))
    _note(root, TOKEN_ADDED, token)
    err().print(
        f"{name} may {role} in the workspace {workspace}. Keep the token safe; it is not shown "
        "again:"
    )
    click.echo(text)


@command.command("list")
@STORE
def list_tokens(store: Path | None) -> None:
    """List all tokens, without their secrets."""
    root = _root(store)
    try:
        tokens = Tokens(root).all()
    except StoreError as error:
        leave(FAILED, str(error))
    rows = [(t.name, t.role, t.workspace, t.created[:10], _state(t), t.id) for t in tokens]
    print_table(
        out(), "Tokens", ("name", "role", "workspace", "made", "state", "id"), rows, words=6
    )


@command.command()
@click.argument("name")
@STORE
def revoke(name: str, store: Path | None) -> None:
    """Make the token of NAME worthless, at once."""
    root = _root(store)
    try:
        token = Tokens(root).revoke(name)
    except TokenError as error:
        leave(BAD_INPUT, str(error))
    except StoreError as error:
        leave(FAILED, str(error))
    _note(root, TOKEN_REVOKED, token)
    err().print(f"The token of {name} is worthless now.")


def _root(store: Path | None) -> Path:
    root = store_folder(store)
    try:
        layout.require(root)
    except StoreError as error:
        leave(FAILED, str(error))
    return root


def _note(root: Path, action: str, token: Token) -> None:
    """In the log of the store; `who` is the user of this machine."""
    Audit(root).note(
        action,
        token=token.id,
        name=token.name,
        role=token.role,
        workspace=token.workspace,
        expires=token.expires,
        who=getpass.getuser(),
    )


def _state(token: Token) -> str:
    if token.revoked:
        return f"revoked {token.revoked[:10]}"
    if not token.usable:
        return f"expired {(token.expires or '')[:10]}"
    return f"until {token.expires[:10]}" if token.expires else "good"
