"""What can be known to be wrong with a job before anything is solved.

Makes the mesh where that needs no mesher (patches, the client's own mesh), puts supports, loads and
requests on it, and looks for free motions. NumPy and shapely only, so that the API can answer at
once. An outline is checked as a drawing; what finds no place on its mesh shows in a worker.
"""

import numpy as np
from numpy.typing import NDArray

from workers.analysis.load_places import load_faults
from workers.analysis.mesh import Mesh
from workers.analysis.meshing.direct import mesh_directly
from workers.analysis.meshing.outline import draw
from workers.analysis.motions import free_motions
from workers.analysis.request_places import request_faults
from workers.analysis.selection import Finder
from workers.analysis.springs import spring_blocks
from workers.analysis.support_rows import support_rows
from workers.errors import DocumentError, Fault, FaultyError, MechanismError, MeshError
from workers.job import Job, Load, MeshGeometry, Nodes, OutlineGeometry, Support

Array = NDArray[np.float64]


def preflight(job: Job) -> Mesh | None:
    """Look a job over.

    Returns
    -------
    Mesh or None   the mesh, if it needs no mesher

    Raises
    ------
    DocumentError         all faults found: those of the mesh alone, or if it is sound those of
        supports, loads, requests and free motions.
    UnknownElementError   the element type is not installed.
    """
    if isinstance(job.geometry, OutlineGeometry):
        draw(job.geometry)
    try:
        mesh = mesh_directly(job)
    except MeshError as error:
        raise DocumentError(error.faults) from error
    faults = _numbering_faults(job)
    if mesh is not None:
        faults += placing_faults(job, mesh)
    if faults:
        raise DocumentError(faults)
    return mesh


def placing_faults(job: Job, mesh: Mesh) -> list[Fault]:
    """Whatever finds no place on the mesh, and what the supports leave free to move."""
    finder = Finder(mesh)
    faults: list[Fault] = []
    held = []
    for support in job.supports:
        try:
            held.append(_held(support, finder))
        except FaultyError as error:
            faults.extend(error.faults)
    if not faults:
        nodes = np.concatenate([nodes for nodes, _ in held] or [np.empty(0, np.intp)])
        directions = np.concatenate([d for _, d in held] or [np.empty((0, 2))])
        if motions := free_motions(mesh, nodes, directions):
            faults.extend(MechanismError(motions).faults)
    return [*faults, *load_faults(job, finder), *request_faults(job.requests, mesh)]


def _held(support: Support, finder: Finder) -> tuple[NDArray[np.intp], Array]:
    """Nodes (r,) that a support holds, and in which directions (r, 2); springs count."""
    finder.find(support.on, f"{support.pointer}/on")
    rows = list(support_rows(support, 0, 0, finder.mesh))
    nodes, directions = spring_blocks(support, finder.mesh).holding()
    return (
        np.concatenate([*(row.node for row in rows), nodes]).astype(np.intp),
        np.concatenate([*(row.direction for row in rows), directions]),
    )


def _numbering_faults(job: Job) -> list[Fault]:
    """Node numbers mean something only on a mesh that the client has numbered."""
    if isinstance(job.geometry, MeshGeometry):
        return []
    placed: list[Support | Load] = [
        *job.supports,
        *(load for case in job.load_cases for load in case.loads),
    ]
    return [
        Fault(
            f"{part.pointer}/on/nodes",
            "nodes are numbered by the mesher here, and differently when it changes; use a name, "
            "a segment, a box or a circle",
        )
        for part in placed
        if isinstance(part.on, Nodes)
    ]
