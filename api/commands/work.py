"""`fishplate work`: workers on this machine, for a store and a queue that others share."""

import logging

import click

from api.commands.settings import settings_with
from api.commands.terminal import FAILED, leave
from workers.errors import FishplateError
from workers.pool import run_pool


@click.command()
@click.option("--workers", type=click.IntRange(1, 1024), help="Jobs to work on at a time.")
def command(workers: int | None) -> None:
    """Run workers for a queue that runs elsewhere.

    FISHPLATE_REDIS_URL names the queue and FISHPLATE_STORE the folder of the jobs; both must be
    those of the server. On SIGTERM or SIGINT running jobs may end; what does not is queued again.
    """
    logging.basicConfig(level=logging.INFO, format="%(asctime)s %(levelname)s %(message)s")
    try:
        run_pool(settings_with(workers=workers))
    except FishplateError as error:
        leave(FAILED, str(error))
