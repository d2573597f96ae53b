"""`fishplate work`: workers on this machine, for a store and a queue that others share."""

import click

from api.commands.settings import settings_with
from api.commands.terminal import BAD_INPUT, FAILED, leave
from workers import logs
from workers.errors import FishplateError
from workers.pool import run_pool


@click.command()
@click.option("--workers", type=click.IntRange(1, 1024), help="Jobs to work on at a time.")
def command(workers: int | None) -> None:
    """Run workers for a queue that runs elsewhere.

    FISHPLATE_REDIS_URL names the queue and FISHPLATE_STORE the folder of the jobs; both must be
    those of the server. On SIGTERM or SIGINT running jobs may end; what does not is queued again.
    """
    settings = settings_with(workers=workers)
    if settings.workers == 0:
        leave(
            BAD_INPUT, "FISHPLATE_WORKERS=0 is for `fishplate serve`; say how many with --workers."
        )
    logs.configure(settings.log_level)
    try:
        run_pool(settings)
    except FishplateError as error:
        leave(FAILED, str(error))
