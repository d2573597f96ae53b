"""The Flask application, put together. What it answers is in the modules it registers."""

from flask import Flask
from werkzeug.middleware.proxy_fix import ProxyFix

from api import (
    access,
    batches,
    catalogue,
    checks,
    docs,
    health,
    jobs,
    metrics,
    packing,
    pages,
    problems,
    rates,
    results,
    tracing,
)
from api.exposure import require_tokens_beyond_loopback
from api.openapi import ABOUT, SETTINGS, Api
from api.preferences import WaitingRoom
from api.responses import CautiousJSON
from api.services import KEY, Services
from workers import layout
from workers.audit import Audit
from workers.preflight import Foresight
from workers.queue import Queue
from workers.settings import Settings
from workers.store import Store
from workers.tokens import Tokens

BLUEPRINTS = (
    jobs.blueprint,
    checks.blueprint,
    batches.blueprint,
    results.blueprint,
    catalogue.blueprint,
    health.blueprint,
    metrics.blueprint,
)


def create_app(settings: Settings | None = None) -> Flask:
    """The application; without settings, those of the environment (`workers/settings.py`).

    Raises
    ------
    SettingsError   a setting is wrong, or anybody could reach the server.
    LayoutError     the store is laid out otherwise than this program expects.
    """
    settings = settings or Settings.from_environment()
    app = Flask("api", static_folder=None)
    app.config.update(SETTINGS)
    app.config["MAX_CONTENT_LENGTH"] = settings.body_bytes + 1  # see bodies.py
    app.json = CautiousJSON(app)
    require_tokens_beyond_loopback(settings)
    layout.require(settings.store)
    app.extensions[KEY] = Services(
        settings,
        Store(settings.store),
        Queue(settings),
        WaitingRoom(settings.api_threads // 2),
        Tokens(settings.store),
        Audit(settings.store),
        Foresight(),
    )
    packing.register(app)
    api = Api(app, spec_kwargs={"info": {"description": ABOUT}})
    api.describe_tokens()
    problems.register(app)
    for blueprint in BLUEPRINTS:
        api.register_blueprint(blueprint)
    app.register_blueprint(docs.blueprint)
    app.register_blueprint(pages.blueprint)
    # In this order: its name, whose it is, whether he asks too often, whether he may.
    tracing.register(app)
    app.before_request(access.identify)
    rates.register(app, settings)
    app.before_request(access.authorise)
    if settings.proxies:
        believed = dict.fromkeys(("x_for", "x_proto", "x_host"), settings.proxies)
        app.wsgi_app = ProxyFix(app.wsgi_app, **believed)  # type: ignore[method-assign]
    return app
