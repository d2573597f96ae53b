"""Meshes that need no mesher: mapped patches and the client's own. Numpy only."""

from elements.registry import get
from workers.analysis.mesh import Mesh
from workers.analysis.meshing.explicit import mesh_explicit
from workers.analysis.meshing.patches import mesh_patches
from workers.geometry import MeshGeometry, PatchGeometry


def mesh_directly(geometry: PatchGeometry | MeshGeometry, element: str) -> Mesh:
    """The mesh of the client's own, or of patches with the elements of that name.

    Raises
    ------
    MeshError             the geometry gives no sound mesh; carries every fault found.
    UnknownElementError   the element type for patches is not installed.
    """
    if isinstance(geometry, MeshGeometry):
        return mesh_explicit(geometry)
    return mesh_patches(geometry, get(element))
