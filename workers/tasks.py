"""What rq runs: a job from its document to its published results, or one artefact.

Runs in a work-horse: a process forked for this one task. Whatever happens in here, the worker
outside settles the job afterwards (`reconcile.py`).
"""

import errno
import logging
import shutil
import time
from collections.abc import Callable, Mapping
from contextlib import suppress
from pathlib import Path
from types import MappingProxyType
from typing import Any

import redis

from elements.errors import FishplateError
from workers import durable, pipeline
from workers.batch import Batch, outcome_of, read_batch
from workers.batch_envelope import form_joint, write_joint
from workers.errors import (
    AnalysisError,
    DocumentError,
    Fault,
    FaultyError,
    LimitError,
    MeshError,
    TransitionError,
    UnknownJobError,
)
from workers.kin import followers, has_followers
from workers.limits import TimeLimitError, address_space, memory_limit, time_limit
from workers.logs import about
from workers.queue import ANSWER_LIMIT, Queue
from workers.reconcile import MOST_ATTEMPTS, settle
from workers.record import (
    ANALYSIS,
    DISK,
    DOCUMENT,
    FAILED,
    FINISHED,
    LIMIT,
    MEMORY,
    MESH,
    PROGRAM,
    QUEUED,
    RUNNING,
    TIME,
    Record,
)
from workers.settings import GIBIBYTE, Settings
from workers.shared_model import SharedModel
from workers.store import Store
from workers.tallies import Stopwatch

REPORT_EVERY = 0.2  # shortest time between two reports of the same stage [s]
REPORT_AGAIN = 30.0  # after Redis did not answer [s]
UNHEARD = object()  # stands for a stage that Redis did not take
MESHES_SHARE = 0.5  # of the time limit, for all meshes of an adaptive run
LOOK_EVERY = 1.0  # between two looks whether the job was cancelled [s]

OUT_OF_TIME = (
    "It took longer than the {seconds} s allowed. Use a coarser mesh, fewer load cases at a "
    "time, or have the time limit raised."
)
OUT_OF_MEMORY = (
    "It needed more than the {gibibytes:.1f} GiB of memory allowed. Use a coarser mesh, fewer "
    "load cases at a time, or have the memory limit raised."
)
DISK_FULL = "The disk of the job store is full; the results could not be written."
DISK_WAS_FULL = "The disk of the job store was full; the job begins anew when there is room."
CROWDED = "It ran out of memory beside what other jobs of its model had left; it begins anew alone."
OUR_FAULT = (
    "Fishplate itself failed here ({error}); nothing was made. Please report it together with the "
    "job document."
)

CAUSES_OF: Mapping[type[BaseException], str] = MappingProxyType(
    {DocumentError: DOCUMENT, LimitError: LIMIT, MeshError: MESH, AnalysisError: ANALYSIS}
)

# Of a failed job: its process is as good as new.
HARMLESS = frozenset(CAUSES_OF.values())

log = logging.getLogger(__name__)


def run_job(job_id: str) -> None:
    """Work on a queued job, then on those of the same model behind it; their outcomes are in the
    store afterwards.
    """
    settings = Settings.from_environment()
    store, queue = Store(settings.store), Queue(settings)
    resting = address_space()
    try:
        first = store.record(job_id)
    except UnknownJobError as error:
        log.info("job %s was removed: %s", job_id, error)
        return
    shared = SharedModel() if has_followers(queue, first) else None
    if not _work_on(store, queue, job_id, shared, resting) or shared is None:
        return
    for follower in followers(store, queue, first):
        fit = _work_on(store, queue, follower, shared, resting)
        if store.record(follower).is_final:
            queue.leave_line(follower)
        if fit is False:
            return


def _work_on(
    store: Store, queue: Queue, job_id: str, shared: SharedModel | None, resting: int
) -> bool | None:
    """Work on one job, if nobody else does.

    resting : address space of this process before its first job [bytes]

    Returns whether this process is fit for another job; None if it did nothing.
    """
    try:
        with about(job=job_id), store.working(job_id) as staging:
            # Someone else at work, cancelled, or in line twice: nothing to do.
            if staging is None or store.record(job_id).state != QUEUED:
                return None
            store.transition(job_id, RUNNING)
            record = _attempt(store, queue, job_id, staging, shared, resting)
    except (TransitionError, UnknownJobError) as error:
        log.info("job %s was cancelled or removed: %s", job_id, error)
        settle(store, queue, job_id)  # takes it off the list of the unfinished
        return True
    return record.state == FINISHED or record.cause in HARMLESS


def _attempt(
    store: Store, queue: Queue, job_id: str, staging: Path, shared: SharedModel | None, resting: int
) -> Record:
    """One attempt; ends in a final state unless the store refuses even that, the job shared the
    memory with others, or met a full disk for the first time: then it begins anew alone.
    """
    settings = queue.settings
    watch = Stopwatch()
    try:
        with time_limit(settings.time_limit), memory_limit(settings.memory_limit, resting):
            results = pipeline.run(
                store.document(job_id),
                staging,
                job_id=job_id,
                progress=_reporter(store, queue, job_id, watch),
                pictures=settings.pictures,
                most_dofs=settings.most_dofs,
                seconds=MESHES_SHARE * settings.time_limit,
                shared=shared,
                memory=settings.memory_limit if settings.large_jobs == "iterate" else None,
            )
        watch.enter(None)
        record = store.publish(job_id, staging, results["cautions"], outcome_of(results))
    except (TransitionError, UnknownJobError):
        raise
    except (Exception, TimeLimitError) as error:
        log.warning("job %s failed: %s", job_id, error, exc_info=is_ours(error))
        shutil.rmtree(staging, ignore_errors=True)  # makes room for the record, too
        record = _end_badly(store, queue, job_id, error, alone=shared is None)
    if record.is_final:
        queue.tallies.add_end(record, watch.seconds)
    log.info("job %s is %s", job_id, record.state)
    return record


def _end_badly(
    store: Store, queue: Queue, job_id: str, error: BaseException, *, alone: bool
) -> Record:
    """What becomes of a job whose attempt raised this."""
    if store.recover_published(job_id):  # only its record could not be written
        return store.record(job_id)
    if isinstance(error, MemoryError) and not alone:
        return _begin_anew(store, queue, job_id, CROWDED)
    why = explain(error, queue.settings)
    if why["cause"] == DISK and store.record(job_id).attempts < MOST_ATTEMPTS:
        return _begin_anew(store, queue, job_id, DISK_WAS_FULL)
    return store.transition(job_id, FAILED, **why)


def _begin_anew(store: Store, queue: Queue, job_id: str, why: str) -> Record:
    """Put a job in line again; after this attempt it will be worked on alone."""
    record = store.transition(job_id, QUEUED, reason=why)
    with suppress(redis.RedisError):  # then the reconciler will do it
        queue.submit(job_id)
    return record


def explain(error: BaseException, settings: Settings) -> dict[str, Any]:
    """What went wrong, in plain words; with the faults of the document, if it is to blame."""
    if isinstance(error, FaultyError):
        cause = next((CAUSES_OF[c] for c in type(error).__mro__ if c in CAUSES_OF), ANALYSIS)
        return {"reason": _summary(error.faults), "cause": cause, "faults": error.faults}
    if isinstance(error, TimeLimitError):
        return {"reason": OUT_OF_TIME.format(seconds=error.seconds), "cause": TIME}
    if isinstance(error, MemoryError):
        gibibytes = settings.memory_limit / GIBIBYTE
        return {"reason": OUT_OF_MEMORY.format(gibibytes=gibibytes), "cause": MEMORY}
    if isinstance(error, OSError) and error.errno in (errno.ENOSPC, errno.EDQUOT, errno.EFBIG):
        return {"reason": DISK_FULL, "cause": DISK}
    if isinstance(error, FishplateError):
        return {"reason": str(error), "cause": PROGRAM}
    reason = OUR_FAULT.format(error=f"{type(error).__name__}: {error}")
    return {"reason": reason, "cause": PROGRAM}


def is_ours(error: BaseException) -> bool:
    """Whether the operator should see where in the program it happened."""
    return not isinstance(error, FishplateError | MemoryError | TimeLimitError)


def _summary(faults: tuple[Fault, ...]) -> str:
    more = f" (and {len(faults) - 1} more)" if len(faults) > 1 else ""
    return f"{faults[0].pointer or '/'}: {faults[0].message}{more}"


def _reporter(
    store: Store, queue: Queue, job_id: str, watch: Stopwatch
) -> Callable[[str, float], None]:
    """The progress function of a job: tells Redis, seldom; raises once the job is cancelled."""
    reported: object = None
    silent_until = next_look = 0.0

    def progress(stage: str, fraction: float) -> None:
        nonlocal reported, silent_until, next_look
        watch.enter(stage)
        moment = time.monotonic()
        if moment >= next_look:
            next_look = moment + LOOK_EVERY
            if (state := store.record(job_id).state) != RUNNING:
                raise TransitionError(job_id, state, RUNNING)
        if moment < silent_until and reported in (stage, UNHEARD):
            return
        try:
            queue.set_progress(job_id, stage, fraction)
            reported, silent_until = stage, moment + REPORT_EVERY
        except redis.RedisError:  # progress is a convenience; the job goes on without
            reported, silent_until = UNHEARD, moment + REPORT_AGAIN

    return progress


def make_artefact(job_id: str, kind: str, case: str, quantity: str | None = None) -> dict[str, Any]:
    """Make one file of a finished job from its stored displacements.

    Returns {"ok": True}, or {"ok": False, "error": class name, "reason": plain words}.
    """
    settings = Settings.from_environment()
    store = Store(settings.store)
    try:
        with time_limit(ANSWER_LIMIT), memory_limit(settings.memory_limit):
            _make(store, store.results_path(job_id), kind, case, quantity)
    except KeyError as error:
        return refusal(error, f"the job has nothing of the name {error}")
    except (Exception, TimeLimitError) as error:
        log.warning("no %s of job %s: %s", kind, job_id, error, exc_info=is_ours(error))
        return refusal(error, explain(error, settings)["reason"])
    return {"ok": True}


def make_batch_file(label: str, workspace: str | None, digest: str, kind: str) -> dict[str, Any]:
    """Make one file of the joint envelope of a batch's finished jobs; returns as above.

    digest : of the jobs meant; should more have finished meanwhile, it is made for all of these.
    """
    settings = Settings.from_environment()
    store = Store(settings.store)
    try:
        with time_limit(ANSWER_LIMIT), memory_limit(settings.memory_limit):
            _make_joint(store, read_batch(store, label, workspace), kind)
    except KeyError as error:
        return refusal(error, f"the batch has nothing of the name {error}")
    except (Exception, TimeLimitError) as error:
        log.warning("no %s of batch %s: %s", kind, label, error, exc_info=is_ours(error))
        return refusal(error, explain(error, settings)["reason"])
    return {"ok": True}


def _make_joint(store: Store, batch: Batch, kind: str) -> None:
    """Make the file, and take out what was made for fewer jobs."""
    place = batch.file(store.root, kind)
    with store.scratch() as scratch:
        durable.make_folder(place.parent)
        joint = form_joint(store, batch, place.parent)
        write_joint(joint, batch, kind, scratch / place.name)
        durable.sync(scratch / place.name)
        (scratch / place.name).replace(place)
    for older in place.parent.parent.iterdir():
        if older != place.parent:
            shutil.rmtree(older, ignore_errors=True)


def refusal(error: BaseException, reason: str) -> dict[str, Any]:
    return {"ok": False, "error": type(error).__name__, "reason": reason}


def _make(store: Store, folder: Path, kind: str, case: str, quantity: str | None) -> None:
    """Make the file in a copy of the folder, so that it is whole when it gets its place."""
    with store.scratch() as scratch:
        for path in folder.iterdir():
            if path.is_file():
                (scratch / path.name).hardlink_to(path)
        if kind == "field":
            made = pipeline.write_fields(scratch, case)
        elif kind == "preview" and quantity is not None:
            made = pipeline.render(scratch, case, quantity)
        elif kind == "envelope":
            made = pipeline.write_envelope(scratch, case)
        elif kind == "line":
            made = pipeline.render_line(scratch, case)
        elif kind == "sheet":
            made = pipeline.render_sheet(folder, scratch)
        else:
            raise KeyError(kind)
        place = folder / made.relative_to(scratch)
        place.parent.mkdir(parents=True, exist_ok=True)
        durable.sync(made)  # else a power cut may leave an empty file of that name
        made.replace(place)
