"""Meshes that need no mesher: mapped patches and the client's own. Numpy only."""

from elements.registry import get
from workers.analysis.mesh import Mesh
from workers.analysis.meshing.explicit import mesh_explicit
from workers.analysis.meshing.patches import mesh_patches
from workers.job import Job, MeshGeometry, PatchGeometry


def mesh_directly(job: Job) -> Mesh | None:
    """The mesh of patches or of the client's own mesh; None for an outline.

    Raises
    ------
    MeshError             the geometry gives no sound mesh; carries every fault found.
    UnknownElementError   the element type for patches is not installed.
    """
    if isinstance(job.geometry, MeshGeometry):
        return mesh_explicit(job.geometry)
    if isinstance(job.geometry, PatchGeometry):
        return mesh_patches(job.geometry, get(job.meshing.element))
    return None
