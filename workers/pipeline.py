"""One job from its document to a folder of results, and single files made from it later.

Used by the queue's tasks and by `fishplate solve` alike. The folder is self-contained: the document
and the displacements are kept in it, and any field file or picture is made from these two, whether
with the job or months later.

    job.json            the document as it was given
    displacements.npy   (N, 2, c) of all load cases
    results.json        what `GET /v1/jobs/{id}/results` answers
    fields/NAME.vtu     previews/NAME/QUANTITY.png     lines/NAME.png
"""

import hashlib
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property
from importlib.metadata import version
from itertools import islice
from pathlib import Path
from typing import Any

import numpy as np
import orjson
from numpy.typing import NDArray
from threadpoolctl import threadpool_limits

from workers.analysis.combine import States, load_states, superpose, superpose_blocks
from workers.analysis.field_mesh import FieldMesh
from workers.analysis.fields import Fields, displacement_fields
from workers.analysis.loads.cases import resolve_loads
from workers.analysis.mesh import Mesh
from workers.analysis.meshing.build import mesh_job
from workers.analysis.model import Model, build_model
from workers.analysis.recovery import Recovery, Temperature
from workers.analysis.solution import solve
from workers.analysis.summary import summarise
from workers.cautions import Caution
from workers.document.read import read_document
from workers.errors import MeshError, PicturesUnavailableError
from workers.job import Job
from workers.outputs import preview, vtu
from workers.outputs.names import file_name
from workers.preflight import placing_faults, preflight
from workers.review.review import review

Progress = Callable[[str, float], None]
Json = dict[str, Any]

DOCUMENT, DISPLACEMENTS, RESULTS = "job.json", "displacements.npy", "results.json"
EAGER_FIELDS = 20  # states whose .vtu is written with the job; further ones are made when asked for


def silent(stage: str, fraction: float) -> None:
    """The progress function of a caller who does not care."""


def warm_up() -> None:
    """Find out once, before processes are forked for the jobs, what each would ask anew."""
    preview.probe()


def run(
    document: bytes,
    folder: Path,
    *,
    job_id: str | None = None,
    progress: Progress = silent,
    pictures: int = 6,
    fields: int | None = EAGER_FIELDS,
) -> Json:
    """Solve a job and write its results into an empty folder.

    Parameters
    ----------
    progress : called with the stage (reading, meshing, assembling, factorising, solving,
        recovering, reviewing, writing, drawing) and the fraction of it that is done
    pictures : how many to draw now, of the plate and of the lines
    fields : states whose field file is written now; None for all

    Returns
    -------
    dict   the results, as written to results.json

    Raises
    ------
    DocumentError, MeshError, AnalysisError   what is wrong, where, and what to do.
    OSError                                   the folder could not be written.
    """
    # Many small fronts and gathers: a second BLAS thread costs more than it brings.
    with threadpool_limits(1):
        progress("reading", 0.0)
        job = read_document(document)
        progress("meshing", 0.0)
        mesh = prepare(job)
        solution = solve(job, mesh, progress)
        progress("recovering", 0.0)
        work = Work(solution.model, solution.displacement, solution.temperature)
        results = summarise(solution, work.recovery, work.states, progress)
        progress("reviewing", 0.0)
        cautions = review(job, mesh, results, solution)
        (folder / DOCUMENT).write_bytes(document)
        np.save(folder / DISPLACEMENTS, solution.displacement)
        results = {
            "job": _about(job, document, job_id),
            "units": {
                "length": job.units.length,
                "force": job.units.force,
                "stress": job.units.stress,
            },
            **results,
            "convergence": None,
            "cautions": [caution.as_json() for caution in cautions],
        }
        filed = Filing(folder, work, cautions, results)
        results["files"] = {"fields": filed.write_some_fields(fields, progress)}
        results["files"]["lines"] = filed.draw_some_lines(pictures)
        results["files"]["previews"], results["pictures"] = filed.draw_some(pictures, progress)
        (folder / RESULTS).write_bytes(orjson.dumps(results, option=orjson.OPT_INDENT_2))
    return results


def prepare(job: Job) -> Mesh:
    """The mesh of a job, with everything that the job puts on it looked over.

    Raises
    ------
    DocumentError, MeshError   carry all faults that show before solving.
    """
    mesh = preflight(job)
    if mesh is None:
        mesh = mesh_job(job)
        if faults := placing_faults(job, mesh):
            raise MeshError(faults)
    return mesh


def write_fields(folder: Path, state: str) -> Path:
    """Write the field file of a load case or combination of a finished job; returns its path.

    Raises
    ------
    KeyError   the job has no such state.
    """
    with threadpool_limits(1):
        return _reopen(folder).write_fields(state)


def render(folder: Path, state: str, quantity: str) -> Path:
    """Draw one picture of a finished job; returns its path.

    Raises
    ------
    KeyError                   the job has no such state, or there is no such quantity.
    PicturesUnavailableError   this machine cannot render; the message says why.
    """
    with threadpool_limits(1):
        return _reopen(folder).draw(state, quantity)


def render_line(folder: Path, name: str) -> Path:
    """Draw the stress along one line of a finished job; returns its path.

    Raises
    ------
    KeyError   the job has no such line.
    """
    results = orjson.loads((folder / RESULTS).read_bytes())
    job = read_document((folder / DOCUMENT).read_bytes())
    return _draw_line(folder, job, name, results, [Caution(**c) for c in results["cautions"]])


def _draw_line(
    folder: Path, job: Job, name: str, results: Mapping[str, Any], cautions: Sequence[Caution]
) -> Path:
    line = results["lines"][name]
    path = folder / "lines" / f"{file_name(name)}.png"
    path.parent.mkdir(exist_ok=True)
    preview.render_line(path, job, name, line, cautions=cautions)
    return path


@dataclass(frozen=True, eq=False)
class Work:
    """A solved model, and what is made from it when first needed.

    displacement : (N, 2, c) of the load cases [L]
    temperature : for each block (m, c) temperature changes [K], None if there are none
    """

    model: Model
    displacement: NDArray[np.float64]
    temperature: Temperature

    @property
    def job(self) -> Job:
        return self.model.job

    @cached_property
    def recovery(self) -> Recovery:
        return Recovery.build(self.model)

    @cached_property
    def states(self) -> States:
        return load_states(self.job)

    @property
    def field_mesh(self) -> FieldMesh:
        return self.recovery.field_mesh

    def fields(self, state: str) -> Fields:
        """Fields of a load case or combination; KeyError if there is no such state."""
        column = self.states.index(state)
        columns = range(column, column + 1)
        return displacement_fields(
            self.recovery,
            state,
            superpose(self.displacement, self.states, columns),
            superpose_blocks(self.temperature, self.states, columns),
        )


@dataclass(frozen=True, eq=False)
class Filing:
    """Writes files of one job into its folder, each under a name of its own until it is whole."""

    folder: Path
    work: Work
    cautions: list[Caution]
    results: Mapping[str, Any]

    def write_fields(self, state: str) -> Path:
        path = self.folder / "fields" / f"{file_name(state)}.vtu"
        path.parent.mkdir(exist_ok=True)
        fields = self.work.fields(state)
        vtu.write_fields(path, self.work.job, self.work.field_mesh, fields, self.cautions)
        return path

    def draw(self, state: str, quantity: str) -> Path:
        path = self.folder / "previews" / file_name(state) / f"{quantity}.png"
        if quantity not in preview.QUANTITIES:
            raise KeyError(quantity)
        path.parent.mkdir(parents=True, exist_ok=True)
        work = self.work
        if quantity == "model":
            preview.render_model(
                path, work.job, work.model.mesh, case=state, cautions=self.cautions
            )
            return path
        fields = work.fields(state)
        if quantity == "deformed":
            preview.render_deformed(path, work.job, work.field_mesh, fields, cautions=self.cautions)
        else:
            preview.render_field(
                path, work.job, work.field_mesh, fields, quantity,
                cautions=self.cautions, limits=self._limits(quantity),
            )  # fmt: skip
        return path

    def write_some_fields(self, count: int | None, progress: Progress) -> dict[str, str]:
        """Field files of the first states; their paths within the folder."""
        names = self.work.states.names[:count]
        written = {}
        for done, name in enumerate(names):
            progress("writing", done / len(names))
            written[name] = str(self.write_fields(name).relative_to(self.folder))
        return written

    def draw_some(self, count: int, progress: Progress) -> tuple[dict[str, dict[str, str]], Json]:
        """The most useful pictures first; their paths, and whether there can be any."""
        drawn: dict[str, dict[str, str]] = {}
        if (reason := preview.probe()) is not None:
            return drawn, {"available": False, "reason": reason}
        for done, (state, quantity) in enumerate(islice(self._worth_drawing(), count)):
            progress("drawing", done / count)
            try:
                path = self.draw(state, quantity)
            except PicturesUnavailableError as error:
                return drawn, {"available": False, "reason": str(error)}
            drawn.setdefault(state, {})[quantity] = str(path.relative_to(self.folder))
        return drawn, {"available": True}

    def draw_some_lines(self, count: int) -> dict[str, str]:
        """Graphs of the first lines; their paths within the folder."""
        drawn = {}
        for name in islice(self.results["lines"], count):
            path = _draw_line(self.folder, self.work.job, name, self.results, self.cautions)
            drawn[name] = str(path.relative_to(self.folder))
        return drawn

    def _worth_drawing(self) -> Iterator[tuple[str, str]]:
        """Everything about the governing state, then the rest case by case."""
        first = self.results["envelope"]["von_mises"]["governs"]
        for state in (first, *(name for name in self.work.states.names if name != first)):
            for quantity in preview.QUANTITIES:
                yield state, quantity

    def _limits(self, quantity: str) -> tuple[float, float]:
        """One legend for all states of the job, so that their pictures compare."""
        states = {**self.results["cases"], **self.results["combinations"]}.values()
        low = [state[quantity].get("least", {"value": 0.0})["value"] for state in states]
        high = [state[quantity]["value"] for state in states]
        return min(low + high), max(low + high)


def _reopen(folder: Path) -> Filing:
    """A finished job from its folder: the document and the displacements say everything."""
    job = read_document((folder / DOCUMENT).read_bytes())
    results = orjson.loads((folder / RESULTS).read_bytes())
    model = build_model(job, mesh_job(job))
    displacement = np.load(folder / DISPLACEMENTS, mmap_mode="r")
    work = Work(model, displacement, resolve_loads(model).heating.by_element(model))
    return Filing(folder, work, [Caution(**c) for c in results["cautions"]], results)


def _about(job: Job, document: bytes, job_id: str | None) -> Json:
    return {
        **({} if job_id is None else {"id": job_id}),
        "title": job.title,
        "label": job.label,
        "checksum": f"sha256:{hashlib.sha256(document).hexdigest()}",
        "fishplate": version("fishplate"),
    }
