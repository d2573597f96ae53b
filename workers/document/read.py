"""The way in and out: bytes to a `Job`, and a `Job` to its document."""

from collections.abc import Mapping
from typing import Any, cast

from marshmallow import ValidationError

from workers.document.faults import MOST_FAULTS, flatten, in_document_order, seen
from workers.document.job import JobSchema
from workers.document.parse import MOST_LEVELS, parse_leniently
from workers.errors import DocumentError, Fault
from workers.job import Job

_SCHEMA = JobSchema()


def read_document(data: bytes, most_levels: int = MOST_LEVELS) -> Job:
    """The job that a JSON document describes.

    most_levels : of objects and lists within each other

    Raises
    ------
    DocumentError   with every fault that the document alone can tell.
    """
    document, faults = parse_leniently(data, most_levels)
    return _load(document, faults)


def load(document: Any) -> Job:
    """The job that an already parsed document describes; raises as `read_document` does."""
    return _load(document, [])


def to_document(job: Job) -> dict[str, Any]:
    """The document of a job, in plain numbers; `load` makes an equal job of it."""
    return cast(dict[str, Any], _SCHEMA.dump(job))


def _load(document: Any, known: list[Fault]) -> Job:
    if not isinstance(document, Mapping):
        raise DocumentError([*known, Fault("", f"must be an object, not {seen(document)}")])
    try:
        job = cast(Job, _SCHEMA.load(document))
        found = []
    except ValidationError as error:
        places = {fault.pointer for fault in known}
        found = [fault for fault in flatten(error.messages) if fault.pointer not in places]
    if known or found:
        faults = in_document_order([*known, *found], document)
        if len(faults) >= MOST_FAULTS:
            more = Fault("", f"here are the first {MOST_FAULTS} faults; there may be more")
            faults = [more, *faults[:MOST_FAULTS]]
        raise DocumentError(faults)
    return job
