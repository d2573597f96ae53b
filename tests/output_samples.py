"""Small meshes and fields for the tests of what Fishplate writes and draws.

Hand-made on purpose: the outputs are tested without meshing or solving anything.
"""

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from elements.registry import get
from workers.analysis.field_mesh import FieldMesh
from workers.analysis.fields import Fields
from workers.analysis.mesh import PLATE, Block, Mesh
from workers.analysis.plane_stress import constitutive, principal, shear_max, von_mises
from workers.geometry import MeshGeometry, Region
from workers.job import Job, Load, LoadCase, Material, Plate, Support, Units

Map = Callable[[NDArray, NDArray], tuple[NDArray, NDArray]]
E, NU = 210_000.0, 0.3


def mapped_mesh(
    element: str,
    divisions: tuple[int, int],
    shape: Map,
    regions: tuple[str, ...] = (PLATE,),
    region_of: Callable[[NDArray, NDArray], NDArray] | None = None,
) -> Mesh:
    """The unit square, m x n quadrilaterals (or pairs of triangles), carried over by `shape`.

    Sides "low", "right", "high", "left" are those of the square; region_of takes element centres
    in the unit square.
    """
    kind, (m, n) = get(element), divisions
    step = kind.order
    s, t = np.meshgrid(np.linspace(0, 1, step * m + 1), np.linspace(0, 1, step * n + 1))
    number = np.arange(s.size).reshape(s.shape)
    a = number[:-1:step, :-1:step].ravel()
    right, up = step, step * (step * m + 1)
    corners = np.column_stack((a, a + right, a + right + up, a + up))
    if kind.is_triangle:
        split = np.concatenate((corners[:, [0, 1, 2]], corners[:, [0, 2, 3]]))
    else:
        split = corners
    if step == 2:
        mids = [(split[:, i] + np.roll(split, -1, axis=1)[:, i]) // 2 for i in range(kind.corners)]
        split = np.column_stack((split, *mids))
    used, flat = np.unique(split, return_inverse=True)
    nodes = np.column_stack(shape(s.ravel()[used], t.ravel()[used]))
    connectivity = flat.reshape(split.shape).astype(np.int32)
    centre = split[:, : kind.corners]
    in_square = s.ravel()[centre].mean(axis=1), t.ravel()[centre].mean(axis=1)
    region = np.zeros(len(split), np.int32) if region_of is None else region_of(*in_square)
    bare = Mesh(nodes, (Block(kind, connectivity, region.astype(np.int32)),), regions)
    ends = used[bare.facet_ends(bare.boundary)]
    s_end, t_end = s.ravel()[ends], t.ravel()[ends]
    sides = {
        name: bare.boundary[np.all(np.isclose(values, at), axis=1)]
        for name, values, at in (
            ("low", t_end, 0), ("right", s_end, 1), ("high", t_end, 1), ("left", s_end, 0),
        )
    }  # fmt: skip
    return Mesh(bare.nodes, bare.blocks, regions, sides)


def rectangle(length: float, height: float) -> Map:
    return lambda s, t: (length * s, height * t)


def quarter_ring(inner: float, outer: float) -> Map:
    """s runs outward, t from the x axis to the y axis."""

    def shape(s: NDArray, t: NDArray) -> tuple[NDArray, NDArray]:
        radius = inner + (outer - inner) * s
        return radius * np.cos(np.pi / 2 * t), radius * np.sin(np.pi / 2 * t)

    return shape


def fields_of(
    field_mesh: FieldMesh,
    displacement: Callable[[NDArray, NDArray], tuple[NDArray, NDArray]],
    stress: NDArray,
    name: str = "lift",
) -> Fields:
    """Fields with the given displacement and nodal stress (P, 3); elements from displacement."""
    x, y = field_mesh.points.T
    u = np.column_stack(np.broadcast_arrays(*displacement(x, y))).astype(float)
    raw = tuple(
        centre_stress(field_mesh, number, u) for number in range(len(field_mesh.connectivity))
    )
    high, low = principal(stress)
    return Fields(
        name=name,
        displacement=u,
        stress=stress,
        von_mises=von_mises(stress),
        principal_max=high,
        principal_min=low,
        shear_max=shear_max(stress),
        thickness_strain=-NU / E * (stress[:, 0] + stress[:, 1]),
        cell_stress=raw,
        cell_error=tuple(np.linspace(1, 2, len(c)) for c in field_mesh.connectivity),
    )


def centre_stress(field_mesh: FieldMesh, block: int, u: NDArray) -> NDArray[np.float64]:
    """sigma = D B u at the centre of each element, with the element's own operator."""
    element = field_mesh.mesh.blocks[block].element
    points = field_mesh.connectivity[block]
    centre = np.atleast_2d(element.natural_nodes[: element.corners].mean(axis=0))
    law = np.broadcast_to(constitutive(E, NU), (len(points), 3, 3))
    operator = element.stress_operator(field_mesh.points[points], law, centre)
    return np.einsum("mqij,mj->mi", operator, u[points].reshape(len(points), -1))


def plain_job(
    mesh: Mesh,
    *loads: Load,
    supports: tuple[Support, ...] = (),
    title: str = "Slipway cradle web",
    regions: tuple[Region, ...] = (),
    case: str = "lift",
) -> Job:
    """A job whose geometry is the mesh itself; what is drawn comes from the mesh."""
    return Job(
        title=title,
        units=Units("mm", "N"),
        materials={"S355": Material("S355", E, NU, 355.0, 7.85e-9, 1.2e-5)},
        geometry=MeshGeometry(mesh.nodes, (), regions=regions),
        plate=Plate("S355", 10.0),
        supports=supports,
        load_cases=(LoadCase(case, tuple(loads)),),
    )
