"""From a job to its mesh, whatever way its geometry is given."""

from elements.registry import get
from workers.analysis.mesh import Mesh
from workers.analysis.meshing.explicit import mesh_explicit
from workers.analysis.meshing.patches import mesh_patches
from workers.job import Job, MeshGeometry, PatchGeometry


def mesh_job(job: Job) -> Mesh:
    """Make the mesh that a job asks for.

    Raises
    ------
    MeshError          the geometry does not give a sound mesh; carries every fault found.
    UnknownElementError   the element type is not installed.
    """
    if isinstance(job.geometry, MeshGeometry):
        return mesh_explicit(job.geometry)
    if isinstance(job.geometry, PatchGeometry):
        return mesh_patches(job.geometry, get(job.meshing.element))
    raise TypeError(f"no mesher for {type(job.geometry).__name__}")
