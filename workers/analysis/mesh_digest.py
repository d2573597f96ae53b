"""Whether two meshes are the same, told by a digest."""

import hashlib

import numpy as np

from workers.analysis.mesh import Mesh


def mesh_digest(mesh: Mesh) -> str:
    """A digest that meshes share when their nodes, elements and regions are the same."""
    digest = hashlib.sha256(np.ascontiguousarray(mesh.nodes).tobytes())
    for block in mesh.blocks:
        digest.update(block.element.name.encode())
        for array in (block.connectivity, block.region):
            digest.update(np.ascontiguousarray(array, np.int32).tobytes())
    digest.update(repr(mesh.regions).encode())
    return digest.hexdigest()[:32]
