"""What the views work with: settings, store, queue and waiting room of one application."""

from dataclasses import dataclass

from flask import current_app

from api.preferences import WaitingRoom
from workers.queue import Queue
from workers.settings import Settings
from workers.store import Store

KEY = "fishplate"


@dataclass(frozen=True)
class Services:
    settings: Settings
    store: Store
    queue: Queue
    waiting_room: WaitingRoom


def services() -> Services:
    """Services of the application that handles the current request."""
    found: Services = current_app.extensions[KEY]
    return found
