"""Whether the server may be reached from other machines: only when it knows whom to let in."""

import ipaddress
import socket

from workers.errors import SettingsError
from workers.settings import Settings
from workers.tokens import Tokens

BEYOND_LOOPBACK = (
    "{host} can be reached from other machines, and there is no token: anybody could submit and "
    "delete. Make one first, for instance with `fishplate tokens add NAME --role admin`, or listen "
    "on 127.0.0.1."
)


def require_tokens_beyond_loopback(settings: Settings) -> None:
    """Refuse to be reachable for everybody.

    Raises
    ------
    SettingsError   with what to do.
    """
    if not is_loopback(settings.host) and not any(t.usable for t in Tokens(settings.store).all()):
        raise SettingsError(BEYOND_LOOPBACK.format(host=settings.host or "every address"))


def is_loopback(host: str) -> bool:
    """Whether an address to listen on can be reached from this machine only."""
    try:
        found = {str(entry[4][0]) for entry in socket.getaddrinfo(host, None)} if host else set()
    except OSError:  # not a name of this machine; listening will fail, and say so
        found = set()
    return bool(found) and all(ipaddress.ip_address(address).is_loopback for address in found)
