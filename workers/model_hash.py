"""Which jobs have the same model: geometry, meshing, materials, thickness, supports.

Such jobs have one mesh and one stiffness, so that one factorisation serves all of them. NumPy only:
the web process finds this out when it accepts a job.
"""

import hashlib
from dataclasses import replace

import numpy as np

from workers.geometry import Geometry, MeshGeometry
from workers.job import Job


def model_hash(job: Job) -> str | None:
    """A digest that jobs share when they have the same model.

    None for a job whose mesh follows from its loads, or is one of a series. Jobs that say the same
    in other words or another order may differ; that costs them the sharing, nothing else.
    """
    if job.meshing.target_error is not None or job.requests.convergence:
        return None
    digest = hashlib.sha256()
    for part in (job.units, job.materials, job.plate, job.meshing, job.supports):
        digest.update(repr(part).encode())
    _add_geometry(digest, job.geometry)
    return digest.hexdigest()


def _add_geometry(digest: "hashlib._Hash", geometry: Geometry) -> None:
    if not isinstance(geometry, MeshGeometry):
        digest.update(repr(geometry).encode())
        return
    # The text of an array leaves out its middle.
    digest.update(geometry.nodes.tobytes())
    for block in geometry.blocks:
        digest.update(block.connectivity.tobytes())
    blocks = tuple(replace(b, connectivity=np.empty((0, 0), np.int32)) for b in geometry.blocks)
    rest = replace(geometry, nodes=np.empty((0, 2)), blocks=blocks)
    sizes = [block.connectivity.shape for block in geometry.blocks]
    digest.update(repr((rest, geometry.nodes.shape, sizes)).encode())
