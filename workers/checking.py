"""One check: what would happen with a job, from its document to a folder; nothing is solved.

    check.json            what was understood, the mesh, the cost, the cautions known beforehand
    previews/NAME.png     the plate with mesh, dimensions, supports and the loads of a state
    mesh.npz              where further pictures may be wanted: the mesh

Used by the queue's tasks and by `fishplate check` alike.
"""

from collections.abc import Sequence
from itertools import islice
from pathlib import Path

import numpy as np
import orjson

from workers.analysis.adaptive import MOST_DOFS
from workers.analysis.combine import load_states
from workers.analysis.mesh import Mesh
from workers.analysis.meshing.build import mesh_job
from workers.analysis.multifrontal.symbolic import analyse
from workers.analysis.stopwatch import Stopwatch
from workers.analysis.summary import mesh_figures
from workers.analysis.threads import one_thread
from workers.cautions import Caution
from workers.document.read import read_document
from workers.errors import PicturesUnavailableError
from workers.estimate import (
    Estimate,
    FactorSize,
    counted_factor,
    estimate,
    fitted_factor,
    measure_slowness,
    workload,
)
from workers.filing import Json, Progress, eager_states
from workers.job import Job
from workers.mesh_file import read_mesh, write_mesh
from workers.outputs import preview
from workers.outputs.names import file_name
from workers.pipeline import about, silent
from workers.review.review import review
from workers.sizes import check_dofs
from workers.understanding import Understood, describe, look_over

CHECK, MESH = "check.json", "mesh.npz"
EAGER_PICTURES = 3  # drawn with the check, half a second each; further ones when asked for
# Counting the entries of the factor takes about 3 us for each unknown; beyond this many the
# formula has to do.
MOST_COUNTED = 400_000


def check(
    document: bytes,
    folder: Path,
    *,
    progress: Progress = silent,
    pictures: int = EAGER_PICTURES,
    with_job: int = 6,
    most_dofs: int | None = None,
    keep_mesh: bool = False,
) -> Json:
    """Look a job over and write what was found into an empty folder.

    Parameters
    ----------
    progress : called with the stage (reading, meshing, reviewing, drawing) and its fraction
    pictures : of how many states to draw the loads now
    with_job : pictures that will be drawn with the job itself; they take time
    most_dofs : how many unknowns a mesh may have here; None for any number
    keep_mesh : for `draw`

    Returns
    -------
    dict   the check, as written to check.json

    Raises
    ------
    DocumentError, MeshError   carry everything that is wrong with the job.
    LimitError                 the mesh has more unknowns than are allowed.
    OSError                    the folder could not be written.
    """
    watch = Stopwatch()
    with one_thread():
        progress("reading", 0.0)
        with watch("reading"):
            job = read_document(document)
        progress("meshing", 0.0)
        with watch("meshing"):
            mesh = mesh_job(job)
            check_dofs(mesh.dof_count, most_dofs)
            understood = look_over(job, mesh)
        progress("reviewing", 0.0)
        figures = mesh_figures(understood.model)
        cautions = review(job, mesh)
        found = {
            "job": about(job, document, None),
            "units": {
                "length": job.units.length,
                "force": job.units.force,
                "stress": job.units.stress,
            },
            "mesh": figures,
            **describe(understood, figures["regions"]),
            "estimate": cost(understood, watch, with_job, most_dofs).as_json(),
            "cautions": [caution.as_json() for caution in cautions],
        }
        states = [*found["cases"], *found["combinations"]]
        found["previews"], found["pictures"] = _draw_some(
            folder, job, mesh, cautions, list(islice(states, pictures)), progress
        )
    if keep_mesh:
        write_mesh(folder / MESH, mesh)
    (folder / CHECK).write_bytes(orjson.dumps(found, option=orjson.OPT_INDENT_2))
    return found


def draw(document: bytes, checked: Path, folder: Path, state: str) -> Path:
    """Draw the loads of one more state of a job into a folder; returns the path.

    checked : folder of the check, with its mesh

    Raises
    ------
    KeyError                   the job has no such case or combination.
    PicturesUnavailableError   this machine cannot render; the message says why.
    """
    with one_thread():
        job = read_document(document)
        found = orjson.loads((checked / CHECK).read_bytes())
        cautions = [Caution(**caution) for caution in found["cautions"]]
        return _draw(folder, job, read_mesh(checked / MESH), cautions, state)


def cost(
    understood: Understood, watch: Stopwatch, pictures: int, most_dofs: int | None = None
) -> Estimate:
    """What the job will cost; the watch has the seconds of reading and meshing."""
    job, mesh = understood.job, understood.mesh
    states = load_states(job)
    load = workload(
        mesh,
        _factor(mesh),
        cases=len(job.load_cases),
        states=len(states),
        fields=len(eager_states(job, states.names)) + (len(states) > 1),  # and the envelope's
        pictures=pictures,
    )
    finest = None
    if job.meshing.target_error is not None or job.requests.convergence:
        finest = min(job.meshing.max_dofs or MOST_DOFS, most_dofs or MOST_DOFS)
    return estimate(load, measure_slowness(), watch.seconds, finest)


def _factor(mesh: Mesh) -> FactorSize:
    if mesh.dof_count > MOST_COUNTED:
        return fitted_factor(mesh)
    fronts = analyse(mesh).fronts
    return counted_factor(2 * np.diff(fronts.first), 2 * np.diff(fronts.border_first))


def _draw_some(
    folder: Path,
    job: Job,
    mesh: Mesh,
    cautions: Sequence[Caution],
    states: Sequence[str],
    progress: Progress,
) -> tuple[dict[str, str], Json]:
    """Pictures of some states; their paths in the folder, and whether there can be any."""
    drawn: dict[str, str] = {}
    if (reason := preview.probe()) is not None:
        return drawn, {"available": False, "reason": reason}
    for done, state in enumerate(states):
        progress("drawing", done / len(states))
        try:
            drawn[state] = str(_draw(folder, job, mesh, cautions, state).relative_to(folder))
        except PicturesUnavailableError as error:
            return drawn, {"available": False, "reason": str(error)}
    return drawn, {"available": True}


def _draw(folder: Path, job: Job, mesh: Mesh, cautions: Sequence[Caution], state: str) -> Path:
    path = folder / "previews" / f"{file_name(state)}.png"
    path.parent.mkdir(exist_ok=True)
    preview.render_model(path, job, mesh, case=state, cautions=cautions)
    return path
