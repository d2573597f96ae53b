"""One job from its document to a folder of results, and single files made from it later.

Used by the queue's tasks and by `fishplate solve` alike. The folder is self-contained: document,
mesh and displacements are kept in it, and any field file or picture is made from these, whether
with the job or months later.

    job.json            the document as it was given
    displacements.npy   (N, 2, c) of all load cases
    results.json        what `GET /v1/jobs/{id}/results` answers
    envelope.npz        the envelope, if there is more than one case or combination
    mesh.npz            the mesh, if it is not simply that of the job's patches or its own
    fields/NAME.vtu     previews/NAME/QUANTITY.png     lines/NAME.png
    envelope/           fields.vtu, nodes.csv, QUANTITY.png
    convergence.png     the error over the unknowns, if there is a convergence record
    tables/NAME.csv     sheet.html
"""

import hashlib
from collections.abc import Callable
from contextlib import suppress
from importlib.metadata import version
from pathlib import Path
from tempfile import TemporaryDirectory

import numpy as np
import orjson

from workers.analysis.adaptive import SECONDS, solve_adaptively
from workers.analysis.envelope import Envelope
from workers.analysis.loads.cases import resolve_loads
from workers.analysis.mesh import Mesh
from workers.analysis.meshing.build import mesh_job
from workers.analysis.model import build_model
from workers.analysis.refiner import refiner
from workers.analysis.series import solve_series
from workers.analysis.solved import Solved, solve_on
from workers.analysis.threads import one_thread
from workers.cautions import Caution
from workers.document.read import read_document
from workers.errors import MeshError
from workers.filing import Filing, Json, Progress, Work, draw_line
from workers.geometry import OutlineGeometry
from workers.job import Job
from workers.mesh_file import read_mesh, write_mesh
from workers.outputs import preview, sheet
from workers.outputs.names import SHEET
from workers.outputs.tables import write_tables
from workers.preflight import placing_faults, preflight
from workers.record import now
from workers.review.review import review
from workers.shared_model import SharedModel
from workers.sizes import check_dofs

DOCUMENT, DISPLACEMENTS, RESULTS = "job.json", "displacements.npy", "results.json"
ENVELOPE, MESH = "envelope.npz", "mesh.npz"
ONE_ELEMENT = b"""{
    "title": "Warming up", "units": {"length": "mm", "force": "N"},
    "materials": {"steel": {"youngs_modulus": 210000, "poissons_ratio": 0.3}},
    "geometry": {"patches": [{"name": "plate", "corners": [[0, 0], [1, 0], [1, 1], [0, 1]],
                              "divisions": [1, 1], "sides": ["low", null, "high", null]}]},
    "plate": {"material": "steel", "thickness": 0.1},
    "supports": [{"on": "low", "ux": 0, "uy": 0}],
    "load_cases": {"pull": [{"on": "high", "total_force": [0, 1]}]}
}"""
VERSION = version("fishplate")  # once: it is read from a file


def silent(stage: str, fraction: float) -> None:
    """The progress function of a caller who does not care."""


def warm_up() -> None:
    """Work on a plate of one element, before processes are forked for the jobs.

    Otherwise each would find out anew which elements, libraries and templates there are: a quarter
    of the time of a small job.
    """
    preview.probe()
    with suppress(OSError), TemporaryDirectory() as folder:  # a full disk is for the jobs to tell
        run(ONE_ELEMENT, Path(folder), pictures=0)
    sheet.warm_up()


def run(
    document: bytes,
    folder: Path,
    *,
    job_id: str | None = None,
    progress: Progress = silent,
    pictures: int = 6,
    most_dofs: int | None = None,
    seconds: float = SECONDS,
    shared: SharedModel | None = None,
    memory: float | None = None,
) -> Json:
    """Solve a job and write its results into an empty folder.

    Parameters
    ----------
    progress : called with the stage (reading, meshing, assembling, factorising, solving,
        recovering, reviewing, writing, drawing) and the fraction of it that is done
    pictures : how many to draw now, of the plate and of the lines
    seconds : for all meshes of an adaptive run together
    shared : what earlier jobs of the same model left, and takes what this one leaves
    memory : a plate whose factor needs more is solved by iteration; one that is solved on finer
        and finer meshes never is [bytes]

    Returns
    -------
    dict   the results, as written to results.json

    Raises
    ------
    DocumentError, MeshError, AnalysisError   what is wrong, where, and what to do.
    LimitError                                more than `most_dofs` degrees of freedom.
    OSError                                   the folder could not be written.
    """
    with one_thread():
        progress("reading", 0.0)
        job = read_document(document)
        solved = solve(job, progress, most_dofs, seconds, shared, memory)
        solution, results = solved.solution, solved.results
        work = Work(
            solution.model, solution.displacement, solution.temperature,
            solved.envelope, solved.recovery,
        )  # fmt: skip
        progress("reviewing", 0.0)
        cautions = review(job, solved.mesh, results, solution, work.recovery)
        (folder / DOCUMENT).write_bytes(document)
        np.save(folder / DISPLACEMENTS, solution.displacement)
        if is_refined(job) or isinstance(job.geometry, OutlineGeometry):
            write_mesh(folder / MESH, solved.mesh)
        if len(work.states) > 1:
            np.savez(folder / ENVELOPE, **solved.envelope.arrays())
        results = {
            "job": about(job, document, job_id),
            "units": {
                "length": job.units.length,
                "force": job.units.force,
                "stress": job.units.stress,
            },
            **results,
            "cautions": [caution.as_json() for caution in cautions],
        }
        filed = Filing(folder, work, cautions, results)
        results["files"] = files = filed.write_some(progress)
        files["lines"] = filed.draw_some_lines(pictures)
        results["pictures"] = filed.draw_some(pictures, files, progress)
        files["tables"], files["sheet"] = write_tables(results, folder), SHEET
        (folder / RESULTS).write_bytes(orjson.dumps(results, option=orjson.OPT_INDENT_2))
        sheet.write_sheet(job, results, folder, folder)
    return results


def is_refined(job: Job) -> bool:
    """Whether a job is solved on more meshes than its own."""
    return job.meshing.target_error is not None or job.requests.convergence


def solve(
    job: Job,
    progress: Progress,
    most_dofs: int | None,
    seconds: float,
    shared: SharedModel | None = None,
    memory: float | None = None,
) -> Solved:
    """Mesh and solve a job, as often as it asks for; only one mesh can be shared."""
    progress("meshing", 0.0)
    if not is_refined(job):
        mesh = prepare(job, shared)
        check_dofs(mesh.dof_count, most_dofs)
        return solve_on(job, mesh, progress, shared, memory)
    refining = refiner(job)
    if job.meshing.target_error is None:
        mesh = prepare(job)
        check_dofs(mesh.dof_count, most_dofs)
        return solve_series(job, refining, mesh, progress, most_dofs)
    mesh = prepare(job, make=refining.first)
    check_dofs(mesh.dof_count, most_dofs)
    return solve_adaptively(job, refining, mesh, progress, most_dofs=most_dofs, seconds=seconds)


def prepare(
    job: Job, shared: SharedModel | None = None, make: Callable[[], Mesh] | None = None
) -> Mesh:
    """The mesh of a job, with everything that the job puts on it looked over.

    make : makes the mesh of an outline; None for the one that the job describes

    Raises
    ------
    DocumentError, MeshError   carry all faults that show before solving.
    """
    if shared is not None and shared.mesh is not None:
        if faults := placing_faults(job, shared.mesh):
            raise MeshError(faults)
        return shared.mesh
    mesh = preflight(job)
    if mesh is None:
        mesh = mesh_job(job) if make is None else make()
        if faults := placing_faults(job, mesh):
            raise MeshError(faults)
    if shared is not None:
        shared.mesh = mesh
    return mesh


def write_fields(folder: Path, state: str) -> Path:
    """Write the field file of a load case or combination of a finished job; returns its path.

    Raises
    ------
    KeyError   the job has no such state.
    """
    with one_thread():
        return reopen(folder).write_fields(state)


def render(folder: Path, state: str, quantity: str) -> Path:
    """Draw one picture of a finished job; returns its path.

    Raises
    ------
    KeyError                   the job has no such state, or there is no such quantity.
    PicturesUnavailableError   this machine cannot render; the message says why.
    """
    with one_thread():
        return reopen(folder).draw(state, quantity)


def write_envelope(folder: Path, kind: str) -> Path:
    """Make a file of the envelope of a finished job; returns its path.

    kind : "fields" (VTK), "nodes" (the table), or a measure: the picture of what governs where

    Raises
    ------
    KeyError                   there is no such file.
    PicturesUnavailableError   this machine cannot render; the message says why.
    """
    with one_thread():
        filing = reopen(folder)
        if kind == "fields":
            return filing.write_envelope()
        if kind == "nodes":
            return filing.write_envelope_table()
        return filing.draw_governing(kind)


def render_line(folder: Path, name: str) -> Path:
    """Draw the stress along one line of a finished job; returns its path.

    Raises
    ------
    KeyError   the job has no such line.
    """
    results = orjson.loads((folder / RESULTS).read_bytes())
    job = read_document((folder / DOCUMENT).read_bytes())
    return draw_line(folder, job, name, results, [Caution(**c) for c in results["cautions"]])


def render_sheet(folder: Path, target: Path) -> Path:
    """Write the review sheet of a finished job anew, into the target folder; returns its path."""
    results = orjson.loads((folder / RESULTS).read_bytes())
    job = read_document((folder / DOCUMENT).read_bytes())
    return sheet.write_sheet(job, results, folder, target)


def reopen(folder: Path, mesh: Mesh | None = None) -> Filing:
    """A finished job from its folder: document, mesh and displacements say everything.

    mesh : where it is known already
    """
    job = read_document((folder / DOCUMENT).read_bytes())
    results = orjson.loads((folder / RESULTS).read_bytes())
    if mesh is None:
        kept = folder / MESH
        mesh = read_mesh(kept) if kept.exists() else mesh_job(job)
    model = build_model(job, mesh)
    displacement = np.load(folder / DISPLACEMENTS, mmap_mode="r")
    formed = None
    if (folder / ENVELOPE).exists():
        with np.load(folder / ENVELOPE, allow_pickle=False) as arrays:
            formed = Envelope.from_arrays(arrays)
    work = Work(model, displacement, resolve_loads(model).heating.by_element(model), formed)
    return Filing(folder, work, [Caution(**c) for c in results["cautions"]], results)


def about(job: Job, document: bytes, job_id: str | None) -> Json:
    return {
        **({} if job_id is None else {"id": job_id}),
        "title": job.title,
        "label": job.label,
        "checksum": f"sha256:{hashlib.sha256(document).hexdigest()}",
        "fishplate": VERSION,
        "made": now(),
    }
