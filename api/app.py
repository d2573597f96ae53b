"""The Flask application, put together. What it answers is in the modules it registers."""

from flask import Flask

from api import catalogue, docs, health, jobs, problems, results
from api.openapi import ABOUT, SETTINGS, Api
from api.preferences import WaitingRoom
from api.responses import CautiousJSON
from api.services import KEY, Services
from workers.queue import Queue
from workers.settings import Settings
from workers.store import Store

BLUEPRINTS = (jobs.blueprint, results.blueprint, catalogue.blueprint, health.blueprint)


def create_app(settings: Settings | None = None) -> Flask:
    """The application; without settings, those of the environment (`workers/settings.py`)."""
    settings = settings or Settings.from_environment()
    app = Flask("api", static_folder=None)
    app.config.update(SETTINGS)
    app.config["MAX_CONTENT_LENGTH"] = settings.body_bytes + 1  # see bodies.py
    app.json = CautiousJSON(app)
    app.extensions[KEY] = Services(
        settings, Store(settings.store), Queue(settings), WaitingRoom(settings.api_threads // 2)
    )
    api = Api(app, spec_kwargs={"info": {"description": ABOUT}})
    problems.register(app)
    for blueprint in BLUEPRINTS:
        api.register_blueprint(blueprint)
    app.register_blueprint(docs.blueprint)
    return app
