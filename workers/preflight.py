"""What can be known to be wrong with a job before anything is solved.

Makes the mesh where that needs no mesher (patches, the client's own mesh), puts supports, loads and
requests on it, and looks for free motions. NumPy and shapely only, so that the API can answer at
once. An outline is checked as a drawing; what finds no place on its mesh shows in a worker.
"""

from collections import OrderedDict
from threading import Lock
from typing import NamedTuple

from elements.registry import get
from workers.analysis.held import held_by
from workers.analysis.load_places import load_faults
from workers.analysis.mesh import Mesh
from workers.analysis.meshing.direct import mesh_directly
from workers.analysis.meshing.outline import draw
from workers.analysis.meshing.plan import count_roughly, plan_faults
from workers.analysis.motions import free_motions
from workers.analysis.request_places import request_faults
from workers.analysis.selection import Finder
from workers.errors import DocumentError, Fault, MechanismError, MeshError
from workers.geometry import OutlineGeometry
from workers.job import Job

MODELS = 4  # remembered
MOST_REMEMBERED = 50_000  # elements of a model: some 50 MB with all that a mesh makes of itself


class Foreseen(NamedTuple):
    """What is known of a sound job before a worker has it.

    mesh : if it needs no mesher
    elements : how many; those of an outline are estimated
    """

    mesh: Mesh | None
    elements: float


def preflight(job: Job) -> Mesh | None:
    """The mesh of a job, if it needs no mesher; raises as `foresee`."""
    return foresee(job).mesh


def foresee(job: Job, known: Foreseen | None = None) -> Foreseen:
    """Look a job over.

    known : what was foreseen of a sound job of the same model (`model_hash.py`)

    Raises
    ------
    DocumentError         all faults found: those of the mesh alone, or if it is sound those of
        supports, loads, requests and free motions.
    UnknownElementError   the element type is not installed.
    """
    if known is not None:
        if known.mesh is not None and (faults := placing_faults(job, known.mesh)):
            raise DocumentError(faults)
        return known
    if isinstance(job.geometry, OutlineGeometry):
        drawing, element = draw(job.geometry), get(job.meshing.element)
        if too_many := plan_faults(drawing, element, job.meshing):
            raise DocumentError(too_many)
        return Foreseen(None, count_roughly(drawing, element, job.meshing))
    try:
        mesh = mesh_directly(job.geometry, job.meshing.element)
    except MeshError as error:
        raise DocumentError(error.faults) from error
    if faults := placing_faults(job, mesh):
        raise DocumentError(faults)
    return Foreseen(mesh, mesh.element_count)


class Foresight:
    """Looks jobs over and remembers the last few models: a script sends one hundreds of times."""

    def __init__(self) -> None:
        self._seen: OrderedDict[str, Foreseen] = OrderedDict()
        self._lock = Lock()

    def foresee(self, job: Job, model: str | None) -> Foreseen:
        """As the function; model : the job's `model_hash`."""
        if model is None:
            return foresee(job)
        with self._lock:
            known = self._seen.pop(model, None)
        found = foresee(job, known)
        if found.elements <= MOST_REMEMBERED:
            with self._lock:
                self._seen[model] = found
                while len(self._seen) > MODELS:
                    self._seen.popitem(last=False)
        return found


def placing_faults(job: Job, mesh: Mesh) -> list[Fault]:
    """Whatever finds no place on the mesh, and what the supports leave free to move."""
    finder = Finder(mesh)
    return [
        *_support_faults(job, finder),
        *load_faults(job, finder),
        *request_faults(job.requests, mesh, job.plate.thickness),
    ]


def _support_faults(job: Job, finder: Finder) -> tuple[Fault, ...]:
    """Supports that find no place, or if all do, the motions that they leave free."""
    try:
        held = held_by(job, finder)
    except MeshError as error:
        return error.faults
    return MechanismError(free_motions(finder.mesh, *held.directions())).faults
