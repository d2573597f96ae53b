"""From a job to its mesh, whatever way its geometry is given."""

from workers.analysis.mesh import Mesh
from workers.analysis.meshing.direct import mesh_directly
from workers.job import Job


def mesh_job(job: Job) -> Mesh:
    """Make the mesh that a job asks for.

    Raises
    ------
    MeshError             the geometry gives no sound mesh; carries every fault found.
    UnknownElementError   the element type is not installed.
    """
    mesh = mesh_directly(job)
    if mesh is None:
        raise TypeError(f"no mesher for {type(job.geometry).__name__}")
    return mesh
