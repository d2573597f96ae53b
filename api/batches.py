"""Batches: the jobs of one label, how far they are and the worst of all that are finished."""

from typing import Any
from urllib.parse import quote, urlencode

from flask import Response

from api.access import caller
from api.artefacts import make_batch_file
from api.batch_schemas import BatchSchema
from api.openapi import Blueprint, describe_file, problems_of
from api.problem_types import NOTHING_JOINT, NOTHING_OF_THAT_NAME, UNKNOWN_BATCH
from api.problems import RefusalError
from api.responses import file_answer
from api.results import CSV, PNG, VTU
from api.services import services
from workers.analysis.envelope import WORST
from workers.batch import Batch, read_batch
from workers.record import CANCELLED, FAILED, FINISHED

blueprint = Blueprint("batches", __name__, url_prefix="/v1", description="Jobs of one label")


@blueprint.get("/batches/<path:label>")
@blueprint.response(200, BatchSchema)
@blueprint.doc(responses=problems_of(404))
def show_batch(label: str) -> dict[str, Any]:
    """Progress of all jobs with a label, and the worst of those that are finished

    Jobs on different meshes are compared by their peaks. Where all finished jobs have the same
    mesh, the links lead to the worst at every node.
    """
    batch = _batch(label)
    counts = batch.counts
    ended = sum(counts[state] for state in (FINISHED, FAILED, CANCELLED))
    return {
        "label": label,
        "jobs": counts,
        "progress": ended / len(batch.records),
        "meshes": batch.meshes,
        "envelopes": list(batch.envelopes()),
        "links": _links(batch),
        "cautions": batch.cautions(),
    }


@blueprint.get("/batches/<path:label>/envelope/fields.vtu")
@blueprint.doc(responses={200: describe_file(VTU), **problems_of(404, 409, 500, 503)})
def show_joint_fields(label: str) -> Response:
    """The worst of all finished jobs at every node, as a VTK XML file

    As the envelope of a job; the states are named with the job that they belong to.
    """
    return _joint_file(label, "fields", VTU)


@blueprint.get("/batches/<path:label>/envelope/nodes.csv")
@blueprint.doc(responses={200: describe_file(CSV), **problems_of(404, 409, 500, 503)})
def show_joint_table(label: str) -> Response:
    """The worst of all finished jobs at every node, with what governs, as a table"""
    return _joint_file(label, "nodes", CSV)


@blueprint.get("/batches/<path:label>/envelope/<measure>.png")
@blueprint.doc(responses={200: describe_file(PNG), **problems_of(404, 409, 500, 503)})
def show_joint_picture(label: str, measure: str) -> Response:
    """A picture of what governs where, over all finished jobs

    The measure is one of von_mises, principal_max, principal_min, shear_max, displacement.
    """
    if measure not in WORST:
        raise RefusalError(
            NOTHING_OF_THAT_NAME, f"There is no measure {measure!r}.", available=sorted(WORST)
        )
    return _joint_file(label, measure, PNG)


def _batch(label: str) -> Batch:
    """The jobs of the label that exist for the caller."""
    batch = read_batch(services().store, label, caller().scope)
    if not batch.records:
        raise RefusalError(UNKNOWN_BATCH, f"No job has the label {label!r}.")
    return batch


def _joint_file(label: str, kind: str, mimetype: str) -> Response:
    batch = _batch(label)
    if batch.meshes != 1:
        detail = f"The finished jobs have {batch.meshes} different meshes or systems of units."
        raise RefusalError(
            NOTHING_JOINT, detail if batch.meshes else "No job of it is finished yet."
        )
    path = make_batch_file(batch, kind)
    return file_answer(path, mimetype, address(label), download_name=f"{label} {path.name}")


def address(label: str) -> str:
    return f"/v1/batches/{quote(label, safe='')}"


def _links(batch: Batch) -> dict[str, Any]:
    here = address(batch.label)
    joint = batch.meshes == 1
    return {
        "self": here,
        "jobs": f"/v1/jobs?{urlencode({'label': batch.label})}",
        "fields": f"{here}/envelope/fields.vtu" if joint else None,
        "nodes": f"{here}/envelope/nodes.csv" if joint else None,
        "picture": f"{here}/envelope/{{measure}}.png" if joint else None,
    }
