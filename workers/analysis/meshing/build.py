"""From a job to its mesh, whatever way its geometry is given."""

from workers.analysis.mesh import Mesh
from workers.analysis.meshing.direct import mesh_directly
from workers.analysis.meshing.free import mesh_drawing
from workers.analysis.meshing.outline import draw
from workers.geometry import OutlineGeometry
from workers.job import Job


def mesh_job(job: Job) -> Mesh:
    """Make the mesh that a job asks for.

    Raises
    ------
    DocumentError         the outline is wrong; carries every fault found.
    MeshError             the geometry gives no sound mesh; carries every fault found.
    UnknownElementError   the element type is not installed.
    """
    if isinstance(job.geometry, OutlineGeometry):
        return mesh_drawing(draw(job.geometry), job.meshing)
    return mesh_directly(job.geometry, job.meshing.element)
