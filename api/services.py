"""What the views work with: settings, store, queue and what else one application has."""

from dataclasses import dataclass

from flask import current_app

from api.preferences import WaitingRoom
from workers.audit import Audit
from workers.preflight import Foresight
from workers.queue import Queue
from workers.settings import Settings
from workers.store import Store
from workers.tokens import Tokens

KEY = "fishplate"


@dataclass(frozen=True)
class Services:
    settings: Settings
    store: Store
    queue: Queue
    waiting_room: WaitingRoom
    tokens: Tokens
    audit: Audit
    foresight: Foresight


def services() -> Services:
    """Services of the application that handles the current request."""
    found: Services = current_app.extensions[KEY]
    return found
