"""Bearer tokens (RFC 6750): who may do what, and in which workspace.

    tokens.json     in the store, readable by its owner only: everything but the secrets

A token is `fishplate_ID_SECRET`: the ID finds the entry, the secret is 256 random bits. Of the
secret only the SHA-256 digest is kept. A password would need a slow, salted derivation, because
people choose passwords that can be guessed; nobody guesses 256 random bits, salted or not, and a
slow derivation would only make each request slow. Whether the digests agree is compared in constant
time.

Once a token has been made every request needs one, and that stays so when the last is revoked or
has expired: entries are kept. Removing the file opens the server again, to this machine only.
"""

import hashlib
import hmac
import re
import secrets
from dataclasses import asdict, dataclass, replace
from datetime import UTC, datetime, timedelta
from pathlib import Path

import orjson

from workers import durable
from workers.errors import StoreError, TokenError
from workers.record import DEFAULT_WORKSPACE, now, timestamp
from workers.store_reader import telling

READ, SUBMIT, ADMIN = ROLES = ("read", "submit", "admin")  # each may all that those before it may
FILE = "tokens.json"
ID_BYTES, SECRET_BYTES = 4, 32
_TOKEN = re.compile(r"fishplate_([0-9a-f]{8})_([0-9a-f]{64})")
# Both stand in logs and tables; a workspace is a folder as well.
_NAME = re.compile(r"[A-Za-z0-9][A-Za-z0-9._-]{0,63}")
_WORKSPACE = re.compile(r"[a-z0-9][a-z0-9-]{0,31}")


@dataclass(frozen=True)
class Token:
    """What is known of a token; times are RFC 3339, UTC.

    name      : of the person or program that has it.
    role      : "read" looks at the jobs of its workspace; "submit" also submits, cancels, removes
        and pins them; "admin" does all that in every workspace.
    workspace : where its jobs are.
    digest    : SHA-256 of the secret.
    """

    id: str
    name: str
    role: str
    workspace: str
    digest: str
    created: str
    expires: str | None = None
    revoked: str | None = None

    @property
    def usable(self) -> bool:
        """Neither revoked nor expired."""
        return self.revoked is None and (self.expires is None or now() < self.expires)

    def may(self, role: str) -> bool:
        """Whether it is good for what the role is good for."""
        return ROLES.index(self.role) >= ROLES.index(role)


class Tokens:
    """The tokens of one store. Reads the file again whenever another process has replaced it."""

    def __init__(self, root: Path) -> None:
        self.path = root / FILE
        self._seen: tuple[int, int, int] | None = None
        self._tokens: tuple[Token, ...] = ()

    def all(self) -> tuple[Token, ...]:
        """Every token that was ever made, in the order of their making.

        Raises
        ------
        StoreError   the file is damaged: then nobody is let in.
        """
        with telling("the tokens could not be read"):
            try:
                status = self.path.stat()
                version = (status.st_ino, status.st_mtime_ns, status.st_size)
                if version != self._seen:
                    self._tokens, self._seen = _parse(self.path.read_bytes()), version
                return self._tokens
            except FileNotFoundError:
                return ()

    def find(self, text: str) -> Token | None:
        """The usable token that the text is; None when it is none (any more)."""
        match = _TOKEN.fullmatch(text)
        wanted = match[1] if match else ""
        entry = next((token for token in self.all() if token.id == wanted), None)
        # Also where there is no such token: the time must not tell which it was.
        known = entry.digest if entry else _digest("")
        agrees = hmac.compare_digest(_digest(match[2] if match else text), known)
        return entry if entry and agrees and entry.usable else None

    def add(
        self,
        name: str,
        role: str,
        workspace: str = DEFAULT_WORKSPACE,
        lifetime: timedelta | None = None,
    ) -> tuple[Token, str]:
        """Make a token; the text is what its bearer sends, and is not to be had again.

        Raises
        ------
        TokenError   the name is in use, or a name is not allowed.
        """
        _check(name, role, workspace)
        secret = secrets.token_hex(SECRET_BYTES)
        with telling("the tokens could not be written"):
            durable.make_folder(self.path.parent)
            with durable.lock(self.path.with_suffix(".lock")):
                tokens = self.all()
                if any(token.name == name and token.revoked is None for token in tokens):
                    raise TokenError(f"there is a token {name!r} already; revoke it first")
                token = Token(
                    id=_new_id({token.id for token in tokens}),
                    name=name,
                    role=role,
                    workspace=workspace,
                    digest=_digest(secret),
                    created=now(),
                    expires=None if lifetime is None else timestamp(datetime.now(UTC) + lifetime),
                )
                self._write((*tokens, token))
        return token, f"fishplate_{token.id}_{secret}"

    def revoke(self, name: str) -> Token:
        """Make a token worthless, at once.

        Raises
        ------
        TokenError   there is none of this name.
        """
        with (
            telling("the tokens could not be written"),
            durable.lock(self.path.with_suffix(".lock")),
        ):
            tokens = self.all()
            for place, token in enumerate(tokens):
                if token.name == name and token.revoked is None:
                    revoked = replace(token, revoked=now())
                    self._write((*tokens[:place], revoked, *tokens[place + 1 :]))
                    return revoked
        raise TokenError(f"there is no token {name!r} that could be revoked")

    def _write(self, tokens: tuple[Token, ...]) -> None:
        data = orjson.dumps([asdict(token) for token in tokens], option=orjson.OPT_INDENT_2)
        durable.replace(self.path, data, mode=0o600)


def _parse(data: bytes) -> tuple[Token, ...]:
    try:
        return tuple(Token(**entry) for entry in orjson.loads(data))
    except (ValueError, TypeError) as error:
        raise StoreError(f"{FILE} is damaged, so nobody is let in: {error}") from error


def _check(name: str, role: str, workspace: str) -> None:
    if not _NAME.fullmatch(name):
        raise TokenError(
            f"{name!r} cannot be the name of a token: 1 to 64 letters, digits and ._- are allowed"
        )
    if role not in ROLES:
        raise TokenError(f"{role!r} is no role; the roles are {', '.join(ROLES)}")
    if not _WORKSPACE.fullmatch(workspace):
        raise TokenError(
            f"{workspace!r} cannot be the name of a workspace: 1 to 32 small letters, digits and "
            "hyphens are allowed"
        )


def _digest(secret: str) -> str:
    return hashlib.sha256(secret.encode(errors="replace")).hexdigest()


def _new_id(taken: set[str]) -> str:
    while (found := secrets.token_hex(ID_BYTES)) in taken:
        pass
    return found
