"""Who asks, what he may do, and which jobs exist for him.

Where no token has been made, whoever is on this machine may do everything; that is for one person
on his own machine. Requests that come from elsewhere, were handed on by a proxy, or name another
host (as a page in a browser can make them do, by pointing a name of its own at this machine) are
not his. Once a token has been made, everything but `OPEN` needs one.

Jobs of other workspaces do not exist for a caller: they are answered like ids that no job has.
"""

import ipaddress
from dataclasses import dataclass
from urllib.parse import urlsplit

import flask
from flask import Request

from api.problem_types import ROLE_NEEDED, TOKEN_NEEDED
from api.problems import RefusalError
from api.services import services
from workers.errors import UnknownJobError
from workers.record import DEFAULT_WORKSPACE, Record
from workers.tokens import ADMIN, READ, SUBMIT, Token

# Endpoints that need no token: nothing of any job is in them, and monitors come without one.
OPEN = frozenset({"health.live", "docs.page", "docs.openapi"})
REALM = 'Bearer realm="fishplate"'
BROWSER_REALM = 'Basic realm="fishplate: any name, and your token as the password"'
LOCAL_NAMES = ("localhost", "127.0.0.1", "::1")
FORWARDED = ("Forwarded", "X-Forwarded-For", "X-Forwarded-Host", "Via")

NOT_LOCAL = (
    "Without tokens this server answers requests from its own machine only. Whoever runs it can "
    "make one with `fishplate tokens add NAME --role submit`."
)


@dataclass(frozen=True)
class Caller:
    """Whoever sent the request.

    name      : of his token; None without tokens.
    workspace : where his jobs go.
    """

    name: str | None
    token_id: str | None
    role: str
    workspace: str

    @property
    def scope(self) -> str | None:
        """The workspace whose jobs he sees; None: all."""
        return None if self.role == ADMIN else self.workspace


LOCAL = Caller(name=None, token_id=None, role=ADMIN, workspace=DEFAULT_WORKSPACE)


def identify() -> None:
    """Find out who asks; whether that is enough is for `authorise`."""
    tokens = services().tokens
    if not tokens.all():
        flask.g.caller = LOCAL if _is_local(flask.request) else None
    else:
        token = tokens.find(_presented(flask.request))
        flask.g.caller = _caller(token) if token else None


def authorise() -> None:
    """Let the request pass, or refuse it.

    Raises
    ------
    RefusalError   401 without a good token, 403 where its role is not enough (RFC 6750, section 3).
    """
    rule, endpoint = flask.request.url_rule, flask.request.endpoint
    if rule is None or endpoint in OPEN:  # an unknown address is a 404 for everybody
        return
    if flask.g.caller is None:
        raise _refusal(flask.request)
    needed = needed_role(flask.request.method)
    if needed == SUBMIT and flask.g.caller.role == READ:
        raise RefusalError(
            ROLE_NEEDED,
            f"The token {flask.g.caller.name} is for looking; this needs the role {needed}.",
            headers={"WWW-Authenticate": f'{REALM}, error="insufficient_scope", scope="{needed}"'},
        )


def needed_role(method: str) -> str:
    """The least role for a method: looking, or changing something."""
    return READ if method in ("GET", "HEAD", "OPTIONS") else SUBMIT


def caller() -> Caller:
    """Whoever sent the request that is being handled."""
    found: Caller = flask.g.caller
    return found


def rate_key() -> str:
    """Whose requests are counted together: a token's, or those of an address without one."""
    asks = flask.g.caller
    return (
        f"token {asks.token_id}" if asks and asks.token_id else f"from {flask.request.remote_addr}"
    )


def is_unguarded() -> bool:
    """Whether the one person on this machine asks."""
    return flask.g.caller is LOCAL


def visible_record(job_id: str) -> Record:
    """The record of a job that exists for the caller.

    Raises
    ------
    UnknownJobError   there is no such job, or it is in another workspace.
    """
    record = services().store.record(job_id)
    if caller().scope not in (None, record.workspace):
        raise UnknownJobError(f"there is no job {job_id!r}")
    return record


def note(action: str, record: Record) -> None:
    """Say in the audit log what the caller did to a job."""
    services().audit.note(
        action,
        job=record.id,
        workspace=record.workspace,
        title=record.title,
        who=caller().name,
        token=caller().token_id,
        address=flask.request.remote_addr,
        request=flask.g.get("request_id"),
    )


def _caller(token: Token) -> Caller:
    return Caller(token.name, token.id, token.role, token.workspace)


def _presented(request: Request) -> str:
    """The token of the Authorization header, or nothing.

    As RFC 6750 section 2.1 has it, or as the password of RFC 7617, which is what a browser asks a
    person for; the user name does not matter. A browser then sends it by itself, also when a page
    from elsewhere sends it here: but such a page can only look (and not see), because whatever
    changes something is JSON, PUT or DELETE, for which browsers ask the server first.
    """
    sent = request.authorization
    if sent is None:
        return ""
    return (sent.token if sent.type == "bearer" else sent.password) or ""


def _is_local(request: Request) -> bool:
    """Whether the request comes from this machine, straight, and under a name of its own."""
    if any(name in request.headers for name in FORWARDED):
        return False
    # A Unix socket has no address; its file says who may.
    if request.remote_addr and not ipaddress.ip_address(request.remote_addr).is_loopback:
        return False
    try:
        return urlsplit(f"//{request.host}").hostname in LOCAL_NAMES
    except ValueError:  # not the name of any host
        return False


def _refusal(request: Request) -> RefusalError:
    if not services().tokens.all():
        return RefusalError(TOKEN_NEEDED, NOT_LOCAL, headers={"WWW-Authenticate": REALM})
    if request.accept_mimetypes.best_match(["application/json", "text/html"]) == "text/html":
        detail = "Give your token as the password."
        return RefusalError(TOKEN_NEEDED, detail, headers={"WWW-Authenticate": BROWSER_REALM})
    if not _presented(request):
        detail = "Send `Authorization: Bearer TOKEN` with the token that you were given."
        return RefusalError(TOKEN_NEEDED, detail, headers={"WWW-Authenticate": REALM})
    return RefusalError(
        TOKEN_NEEDED,
        "The token is not known here, was revoked, or has expired.",
        headers={"WWW-Authenticate": f'{REALM}, error="invalid_token"'},
    )
