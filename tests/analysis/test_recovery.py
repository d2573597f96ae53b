"""Stress recovery: what it must reproduce exactly, on every border and every kind of mesh."""

from collections.abc import Callable

import numpy as np
import pytest

from elements.registry import get
from tests.plates import ELEMENTS, MIXED, annulus, grid, plate_job, warp
from workers.analysis.field_mesh import FieldMesh
from workers.analysis.mesh import Block, Mesh
from workers.analysis.model import build_model
from workers.analysis.patch_recovery import border_corners, recovery_operator, sample_positions
from workers.analysis.recovery import Recovery, raw_stress
from workers.geometry import Region

Field = Callable[[np.ndarray, np.ndarray], np.ndarray]

FIELDS: dict[str, Field] = {
    "constant": lambda x, y: 7.0 + 0 * x,
    "linear": lambda x, y: 3 + 2 * x - 5 * y,
    "quadratic": lambda x, y: 1 - x + 2 * y + 3 * x**2 - 4 * x * y + 5 * y**2,
}
TWO_REGIONS = ("plate", "web")


def _order(kind: str) -> int:
    return 2 if kind in ("T6", "Q8", "T6+Q8") else 1


def _recover(field_mesh: FieldMesh, field: Field) -> np.ndarray:
    """Sample a field where the operator wants it and recover it at the field points.

    Border anchors are sampled inside their own region, so a field may jump between regions.
    """
    samples, anchors = [], []
    for number, points in enumerate(field_mesh.connectivity):
        samples.append(sample_positions(field_mesh, number).reshape(-1, 2))
        centre = field_mesh.points[points].mean(axis=1)
        for corner, elements in enumerate(border_corners(field_mesh, number)):
            at = field_mesh.points[points[elements, corner]]
            anchors.append(at + 1e-12 * (centre[elements] - at))
    return recovery_operator(field_mesh) @ field(*np.concatenate(samples + anchors).T)


def _misfit(field_mesh: FieldMesh, field: Field) -> float:
    exact = field(*field_mesh.points.T)
    return float(np.abs(_recover(field_mesh, field) - exact).max() / np.abs(exact).max())


@pytest.mark.parametrize("kind", ELEMENTS + MIXED)
@pytest.mark.parametrize("shape", ["square", "ring"])
def test_field_in_the_basis_is_exact_at_all_points(kind: str, shape: str) -> None:
    """Least squares reproduce what the polynomial can hold, borders and mid-sides included.

    1e-9: the normal equations of a border patch have a condition number up to 1e5.
    """
    if shape == "square":
        mesh = grid(kind, 6, 5, shape=warp, shuffle=1)
    else:
        mesh = grid(kind, 16, 4, shape=annulus(1.0, 2.0), closed=True)
    field = FIELDS["quadratic" if _order(kind) == 2 else "linear"]
    assert _misfit(FieldMesh.build(mesh), field) < 1e-9


@pytest.mark.parametrize("kind", ELEMENTS)
@pytest.mark.parametrize("cells", [(1, 1), (2, 1), (5, 1), (2, 2)])
def test_constant_field_is_exact_on_the_smallest_meshes(kind: str, cells: tuple[int, int]) -> None:
    field_mesh = FieldMesh.build(grid(kind, *cells, shape=warp))
    assert _misfit(field_mesh, FIELDS["constant"]) < 1e-9


@pytest.mark.parametrize("angle", [0.0, 0.4, np.pi / 2])
@pytest.mark.parametrize("kind", ["T6", "Q8"])
def test_bending_of_a_strip_one_element_wide_is_exact(kind: str, angle: float) -> None:
    """A cantilever's bending stress, (L - x) y in the strip's own axes, however it is turned."""
    cos, sin = np.cos(angle), np.sin(angle)
    mesh = grid(
        kind, 8, 1, size=(8.0, 1.0), shape=lambda x, y: (cos * x - sin * y, sin * x + cos * y)
    )

    def stress(x: np.ndarray, y: np.ndarray) -> np.ndarray:
        along, across = cos * x + sin * y, cos * y - sin * x
        return (8 - along) * (across - 0.5)

    assert _misfit(FieldMesh.build(mesh), stress) < 1e-9


@pytest.mark.parametrize("kind", ELEMENTS)
def test_jump_between_regions_stays_a_jump(kind: str) -> None:
    """Two constants side by side: nothing of one region may leak into the other."""
    mesh = grid(kind, 6, 4, region_of_column=[0, 0, 0, 1, 1, 1], regions=TWO_REGIONS)
    field_mesh = FieldMesh.build(mesh)
    recovered = _recover(field_mesh, lambda x, y: np.where(x < 0.5, 10.0, -20.0))
    np.testing.assert_allclose(recovered, np.where(field_mesh.region == 0, 10.0, -20.0), rtol=1e-9)
    on_border = np.bincount(field_mesh.origin) == 2
    np.testing.assert_allclose(mesh.nodes[on_border, 0], 0.5, atol=1e-12)
    assert on_border.sum() == (5 if _order(kind) == 1 else 9)


def test_border_of_a_field_mesh_is_the_edge_and_the_border_of_regions() -> None:
    mesh = grid("Q8", 4, 4, region_of_column=[0, 0, 1, 1], regions=TWO_REGIONS)
    field_mesh = FieldMesh.build(mesh)
    x, y = field_mesh.points.T
    expected = np.isin(x, (0, 0.5, 1)) | np.isin(y, (0, 1))
    assert (field_mesh.on_border == expected).all()


def test_one_region_has_one_point_for_each_node() -> None:
    mesh = grid("T6", 3, 3, shuffle=2)
    field_mesh = FieldMesh.build(mesh)
    assert (field_mesh.origin == np.arange(mesh.node_count)).all()
    assert (field_mesh.connectivity[0] == mesh.blocks[0].connectivity).all()


def test_elements_that_touch_at_one_node_share_it() -> None:
    """Two squares corner to corner are one region: a valid mesh, if an odd plate."""
    nodes = np.array([[0, 0], [1, 0], [1, 1], [0, 1], [2, 1], [2, 2], [1, 2]], float)
    cells = np.array([[0, 1, 2, 3], [2, 4, 5, 6]], np.int32)
    mesh = Mesh(nodes, (Block(get("Q4"), cells, np.zeros(2, np.int32)),))
    assert _misfit(FieldMesh.build(mesh), FIELDS["constant"]) < 1e-12


# --- the stress that is sampled ------------------------------------------------------------------


@pytest.mark.parametrize("kind", ELEMENTS + MIXED)
def test_linear_displacement_gives_hooke_s_stress_everywhere(kind: str) -> None:
    """u = a x, v = b y, two states at once: Hooke's law by hand, raw and recovered."""
    recovery = Recovery.build(build_model(plate_job(), grid(kind, 5, 4, shape=warp, straight=True)))
    x, y = recovery.model.mesh.nodes.T
    u = np.zeros((len(x), 2, 2))
    u[:, 0, 0], u[:, 1, 0], u[:, 0, 1] = 1e-3 * x, 2e-3 * y, 4e-4 * y
    E, nu = 210e3, 0.3
    stretch = E / (1 - nu**2) * np.array([1e-3 + nu * 2e-3, 2e-3 + nu * 1e-3, 0.0])
    shear = np.array([0.0, 0.0, E / (2 * (1 + nu)) * 4e-4])
    expected = np.stack([stretch, shear], axis=1)
    nodal = recovery.nodal_stress(u)
    np.testing.assert_allclose(nodal, np.tile(expected, (len(nodal), 1, 1)), rtol=1e-9, atol=1e-8)
    corner = recovery.model.mesh.blocks[0].element.natural_nodes[:1]
    raw = raw_stress(recovery.model, 0, corner, u, elements=np.array([3, 1]))
    np.testing.assert_allclose(raw[:, 0], np.tile(expected, (2, 1, 1)), rtol=1e-9, atol=1e-9)


@pytest.mark.parametrize("kind", ["T3", "Q8"])
def test_held_heating_is_compression_both_ways(kind: str) -> None:
    """No displacement, dT = 100 in one region: -E alpha dT / (1 - nu) there, nothing beside it."""
    mesh = grid(kind, 4, 2, region_of_column=[0, 0, 1, 1], regions=TWO_REGIONS)
    job = plate_job(regions=(Region("web", thickness=1.0),))
    recovery = Recovery.build(build_model(job, mesh))
    heat = (np.where(mesh.blocks[0].region == 1, 100.0, 0.0)[:, None],)
    nodal = recovery.nodal_stress(np.zeros((mesh.node_count, 2, 1)), heat)[:, :, 0]
    pressed = -210e3 * 1.2e-5 * 100 / 0.7
    expected = np.where(recovery.field_mesh.region[:, None] == 1, [pressed, pressed, 0.0], 0.0)
    np.testing.assert_allclose(nodal, expected, atol=1e-9 * abs(pressed))
