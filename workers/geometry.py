"""Shapes as the document gives them: outlines, mapped patches, the client's own mesh.

Frozen data. How they are written as JSON is in `workers/document/geometry.py` and `mesh.py`; how
they become a mesh is in `workers/analysis/meshing/`.
"""

from collections.abc import Mapping
from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

Vector = tuple[float, float]
Corners = tuple[Vector, Vector, Vector, Vector]
Names = tuple[str | None, str | None, str | None, str | None]
Places = tuple[Vector | None, Vector | None, Vector | None, Vector | None]
NO_NAMES: Names = (None, None, None, None)
NO_PLACES: Places = (None, None, None, None)


@dataclass(frozen=True)
class Vertex:
    """A corner of a loop and the side that leaves it."""

    at: Vector
    side: str | None = None
    through: Vector | None = None  # the side is the circular arc through this point
    fillet: float | None = None  # radius that rounds this vertex [L]
    fillet_side: str | None = None
    pointer: str = ""


@dataclass(frozen=True)
class CircleShape:
    centre: Vector
    radius: float


@dataclass(frozen=True)
class Hole:
    name: str
    shape: "CircleShape | tuple[Vertex, ...]"
    pointer: str = ""


@dataclass(frozen=True)
class Region:
    """A part with its own thickness or material, or one that loads and sizes refer to by name.

    shape is None when patches or mesh blocks say by name where the region is.
    """

    name: str
    shape: "CircleShape | tuple[Vertex, ...] | None" = None
    thickness: float | None = None
    material: str | None = None
    pointer: str = ""


@dataclass(frozen=True)
class OutlineGeometry:
    outline: tuple[Vertex, ...]
    holes: tuple[Hole, ...] = ()
    regions: tuple[Region, ...] = ()
    points: Mapping[str, Vector] = field(default_factory=dict)


@dataclass(frozen=True)
class Patch:
    """A four-sided block for mapped meshing; sides run corner 1-2, 2-3, 3-4, 4-1."""

    name: str
    corners: Corners
    divisions: tuple[int, int]  # along sides 1-2 and 2-3
    grading: tuple[float, float] = (1.0, 1.0)  # size at the end over size at the start
    sides: Names = NO_NAMES
    through: Places = NO_PLACES
    region: str | None = None
    pointer: str = ""


@dataclass(frozen=True)
class PatchGeometry:
    patches: tuple[Patch, ...]
    regions: tuple[Region, ...] = ()
    points: Mapping[str, Vector] = field(default_factory=dict)


@dataclass(frozen=True, eq=False)
class MeshBlock:
    """Elements of one type, as given: connectivity is (m, n) int32, node numbers from 0."""

    element: str
    connectivity: NDArray[np.int32]
    region: str | None = None
    pointer: str = ""


@dataclass(frozen=True, eq=False)
class MeshGeometry:
    """The client's own mesh: nodes is (N, 2) [L]."""

    nodes: NDArray[np.float64]
    blocks: tuple[MeshBlock, ...]
    sides: Mapping[str, tuple[tuple[int, ...], ...]] = field(default_factory=dict)
    points: Mapping[str, int] = field(default_factory=dict)
    regions: tuple[Region, ...] = ()


Geometry = OutlineGeometry | PatchGeometry | MeshGeometry
