"""What a finished job has: its results, fields, pictures and tables, streamed from the store.

Files that were not made with the job are made by a worker when somebody asks for them.
"""

from collections.abc import Iterable
from functools import lru_cache
from pathlib import Path
from typing import Any

import orjson
from flask import Response

from api.access import visible_record
from api.artefacts import make_artefact
from api.jobs import address
from api.openapi import Blueprint, describe_file, problems_of
from api.problem_types import JOB_CANCELLED, JOB_FAILED, NOT_FINAL, NOTHING_OF_THAT_NAME
from api.problems import RefusalError
from api.responses import file_answer, stream_answer, text_answer
from api.result_schemas import ResultsSchema
from api.services import services
from workers.analysis.envelope import WORST
from workers.outputs.archive import fingerprint, stream_archive
from workers.outputs.names import SHEET, file_name
from workers.outputs.tables import TABLES, write_table
from workers.record import CANCELLED, FAILED, FINISHED

QUANTITIES = ("model", "deformed", "von_mises", "principal_max", "principal_min")

blueprint = Blueprint("results", __name__, url_prefix="/v1", description="What a job came to")

JSON, PNG, CSV = "application/json", "image/png", "text/csv"
HTML, ZIP = "text/html", "application/zip"
VTU = "application/octet-stream"  # VTK XML with raw appended data: no registered media type
RESULTS = "results.json"
# All that is on the sheet is in it, and the browser is told so.
SHEET_POLICY = (
    "default-src 'none'; style-src 'unsafe-inline'; img-src data:; base-uri 'none'; "
    "form-action 'none'; frame-ancestors 'none'"
)


@blueprint.get("/jobs/<job_id>/results")
@blueprint.doc(responses={200: describe_file(JSON, ResultsSchema), **problems_of(404, 409)})
def show_results(job_id: str) -> Response:
    """Results of a finished job

    Streamed as the worker wrote them, cautions included.
    """
    return file_answer(_folder(job_id) / RESULTS, JSON, address(job_id))


@blueprint.get("/jobs/<job_id>/fields/<case>.vtu")
@blueprint.doc(responses={200: describe_file(VTU), **problems_of(404, 409, 500, 503)})
def show_field(job_id: str, case: str) -> Response:
    """Fields of a case or combination, as a VTK XML file

    Point data displacement, stress, von_mises, principal_max, principal_min; cell data error,
    region, thickness; field data cautions and units.
    """
    folder = _folder(job_id)
    path = folder / "fields" / f"{file_name(case)}.vtu"
    if not path.is_file():
        _require(case, "case or combination", _states(folder))
        make_artefact(job_id, "field", case)
    return file_answer(path, VTU, address(job_id), download_name=f"{case}.vtu")


@blueprint.get("/jobs/<job_id>/previews/<case>/<quantity>.png")
@blueprint.doc(responses={200: describe_file(PNG), **problems_of(404, 409, 500, 503)})
def show_preview(job_id: str, case: str, quantity: str) -> Response:
    """A picture of a case or combination

    The quantity is one of model, deformed, von_mises, principal_max, principal_min. The cautions
    are burnt into the footer.
    """
    folder = _folder(job_id)
    path = folder / "previews" / file_name(case) / f"{file_name(quantity)}.png"
    if not path.is_file():
        _require(case, "case or combination", _states(folder))
        _require(quantity, "quantity", QUANTITIES)
        make_artefact(job_id, "preview", case, quantity)
    return file_answer(path, PNG, address(job_id), download_name=f"{case} {quantity}.png")


@blueprint.get("/jobs/<job_id>/envelope/fields.vtu")
@blueprint.doc(responses={200: describe_file(VTU), **problems_of(404, 409, 500, 503)})
def show_envelope(job_id: str) -> Response:
    """The worst of all cases and combinations at every node, as a VTK XML file

    Point data von_mises, principal_max, principal_min, shear_max, displacement_magnitude, and for
    each of them NAME_governs: the number of the governing state in the field data `states`.
    """
    return _envelope_file(job_id, "fields", "fields.vtu", VTU)


@blueprint.get("/jobs/<job_id>/envelope/nodes.csv")
@blueprint.doc(responses={200: describe_file(CSV), **problems_of(404, 409, 500, 503)})
def show_envelope_table(job_id: str) -> Response:
    """The worst of all cases and combinations at every node, with the governing one, as a table"""
    return _envelope_file(job_id, "nodes", "nodes.csv", CSV)


@blueprint.get("/jobs/<job_id>/envelope/<measure>.png")
@blueprint.doc(responses={200: describe_file(PNG), **problems_of(404, 409, 500, 503)})
def show_governing(job_id: str, measure: str) -> Response:
    """A picture of which case or combination governs where

    The measure is one of von_mises, principal_max, principal_min, shear_max, displacement.
    """
    _require(measure, "measure", WORST)
    return _envelope_file(job_id, measure, f"{measure}.png", PNG)


def _envelope_file(job_id: str, kind: str, name: str, mimetype: str) -> Response:
    path = _folder(job_id) / "envelope" / name
    if not path.is_file():
        make_artefact(job_id, "envelope", kind)
    return file_answer(path, mimetype, address(job_id), download_name=f"envelope {name}")


@blueprint.get("/jobs/<job_id>/lines/<line>.png")
@blueprint.doc(responses={200: describe_file(PNG), **problems_of(404, 409, 500, 503)})
def show_line(job_id: str, line: str) -> Response:
    """The stress along a requested line, as a picture

    Von Mises stress and the normal stress across the line over the distance, a curve for each case.
    """
    folder = _folder(job_id)
    path = folder / "lines" / f"{file_name(line)}.png"
    if not path.is_file():
        _require(line, "line", _lines(folder))
        make_artefact(job_id, "line", line)
    return file_answer(path, PNG, address(job_id), download_name=f"{line}.png")


@blueprint.get("/jobs/<job_id>/convergence.png")
@blueprint.doc(responses={200: describe_file(PNG), **problems_of(404, 409)})
def show_convergence(job_id: str) -> Response:
    """The estimated error over the unknowns of all meshes, as a picture

    There is one where the job has a `target_error` or asks for a convergence record.
    """
    path = _folder(job_id) / "convergence.png"
    if not path.is_file():
        raise RefusalError(
            NOTHING_OF_THAT_NAME,
            "The job was solved on one mesh: it has no convergence record. Give it a "
            "`target_error`, or set `requests.convergence`.",
        )
    return file_answer(path, PNG, address(job_id), download_name="convergence.png")


@blueprint.get("/jobs/<job_id>/tables/<name>.csv")
@blueprint.doc(responses={200: describe_file(CSV, parts=False), **problems_of(404, 409)})
def show_table(job_id: str, name: str) -> Response:
    """A part of the results as a table

    The table is one of peaks, envelope, reactions, equilibrium, probes, lines, cuts, hot_spots.
    """
    folder = _folder(job_id)
    _require(name, "table", TABLES)
    results = orjson.loads((folder / RESULTS).read_bytes())
    return text_answer(write_table(name, results), CSV, address(job_id))


@blueprint.get("/jobs/<job_id>/sheet")
@blueprint.doc(responses={200: describe_file(HTML), **problems_of(404, 409, 500, 503)})
def show_sheet(job_id: str) -> Response:
    """The review sheet: one page to read, print and file

    What was analysed, what governs and how sure that is, with pictures and the cautions first. It
    needs no script and nothing from elsewhere, and may be kept as a file.
    """
    path = _folder(job_id) / SHEET
    if not path.is_file():
        make_artefact(job_id, "sheet", "")
    answer = file_answer(path, HTML, address(job_id), download_name=f"{job_id}.html")
    answer.headers["Content-Security-Policy"] = SHEET_POLICY
    return answer


@blueprint.get("/jobs/<job_id>/archive.zip")
@blueprint.doc(responses={200: describe_file(ZIP, parts=False), **problems_of(404, 409)})
def show_archive(job_id: str) -> Response:
    """Everything of a finished job in one file

    Document, results, displacements, fields, pictures, tables and the review sheet, as far as they
    have been made; `manifest.sha256` has the checksum of each.
    """
    folder = _folder(job_id)
    return stream_answer(
        stream_archive(folder), ZIP, address(job_id), f"{job_id}.zip", fingerprint(folder)
    )


def _folder(job_id: str) -> Path:
    """Where the results of a finished job are; a refusal that says why where it is not finished."""
    record = visible_record(job_id)
    if record.state == FINISHED:
        return services().store.results_path(job_id)
    reason = record.reason or ""
    if record.state == FAILED:
        errors = [fault.as_json() for fault in record.faults]
        raise RefusalError(JOB_FAILED, reason or "It failed; see `errors`.", errors=errors)
    if record.state == CANCELLED:
        raise RefusalError(JOB_CANCELLED, reason or "It was cancelled.")
    raise RefusalError(
        NOT_FINAL,
        f"The job is {record.state}.",
        headers={"Retry-After": "2"},
    )


def _require(name: str, kind: str, available: Iterable[str]) -> None:
    if name not in available:
        raise RefusalError(
            NOTHING_OF_THAT_NAME, f"The job has no {kind} {name!r}.", available=sorted(available)
        )


@lru_cache(maxsize=256)  # published results never change, and a path is never used twice
def _states(folder: Path) -> tuple[str, ...]:
    """Names of the cases and combinations."""
    results: dict[str, Any] = orjson.loads((folder / RESULTS).read_bytes())
    return (*results["cases"], *results["combinations"])


@lru_cache(maxsize=256)
def _lines(folder: Path) -> tuple[str, ...]:
    """Names of the lines that the job asked for."""
    return tuple(orjson.loads((folder / RESULTS).read_bytes())["lines"])
