"""Is the server alive, and is it ready to take and run jobs?"""

from collections.abc import Callable
from typing import Any

from redis.exceptions import RedisError

from api.openapi import Blueprint, problems_of
from api.problem_types import NOT_READY
from api.problems import RefusalError
from api.schemas import LiveSchema, ReadySchema
from api.services import services
from workers.errors import StoreError

blueprint = Blueprint(
    "health", __name__, url_prefix="/health", description="For whoever watches over the server"
)


@blueprint.get("/live")
@blueprint.response(200, LiveSchema)
@blueprint.doc(security=[])
def live() -> dict[str, Any]:
    """The process answers"""
    return {"status": "live"}


@blueprint.get("/ready")
@blueprint.response(200, ReadySchema)
@blueprint.doc(responses=problems_of(503))
def ready() -> dict[str, Any]:
    """Jobs can be accepted and will be run

    Asks Redis, writes to the store and counts the workers that are alive, each time anew.
    """
    checks = [
        _check("queue", _queue),
        _check("store", _store),
        _check("workers", _workers),
    ]
    missing = [check["name"] for check in checks if not check["ok"]]
    if missing:
        raise RefusalError(
            NOT_READY, f"Not ready: {', '.join(missing)}.", checks=checks,
            headers={"Retry-After": "5"},
        )  # fmt: skip
    return {"status": "ready", "checks": checks}


def _check(name: str, look: Callable[[], tuple[bool, str]]) -> dict[str, Any]:
    ok, detail = look()
    return {"name": name, "ok": ok, "detail": detail}


def _queue() -> tuple[bool, str]:
    try:
        services().queue.ping()
    except RedisError as error:
        return False, f"Redis does not answer ({type(error).__name__})"
    return True, "Redis answers"


def _store() -> tuple[bool, str]:
    try:
        services().store.probe()
    except StoreError as error:
        return False, str(error)
    return True, "the store can be written"


def _workers() -> tuple[bool, str]:
    try:
        alive = services().queue.workers_alive()
    except RedisError:
        return False, "unknown, because Redis does not answer"
    return alive > 0, f"{alive} alive"
