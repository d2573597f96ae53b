"""Region names of a geometry as numbers on the mesh."""

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray

from workers.analysis.mesh import PLATE
from workers.errors import Fault, MeshError
from workers.geometry import Region


def region_index(
    regions: Sequence[Region], used: Sequence[str | None]
) -> tuple[tuple[str, ...], NDArray[np.int32]]:
    """Names of the regions that occur, and the place of each used name among them.

    Parameters
    ----------
    used : region of each patch or block; None is the plate

    Raises
    ------
    MeshError   a region is declared and never used, or used and never declared.
    """
    declared = {region.name: region for region in regions}
    faults = [
        Fault(
            region.pointer, f'nothing belongs to region {name!r}; say it with "region", or drop it'
        )
        for name, region in declared.items()
        if name not in used
    ]
    faults += [
        Fault("/geometry/regions", f"region {name!r} is used but not declared")
        for name in sorted({name for name in used if name is not None} - set(declared))
    ]
    if faults:
        raise MeshError(faults)
    names = ((PLATE,) if None in used else ()) + tuple(declared)
    return names, np.array([names.index(name or PLATE) for name in used], np.int32)
