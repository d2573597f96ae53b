"""Every kind of load against hand sums of its resultant, and consistent nodal forces by hand."""

from collections.abc import Sequence

import numpy as np
import pytest

from tests.plates import ELEMENTS, MIXED, grid, plate_job, ring, warp
from workers.analysis.circle_fit import fit_circle
from workers.analysis.loads.cases import Loads, resolve_loads
from workers.analysis.mesh import Mesh
from workers.analysis.model import build_model
from workers.errors import MeshError
from workers.geometry import Region
from workers.job import (
    Acceleration,
    Bearing,
    BodyForce,
    Box,
    LineLoad,
    Load,
    Named,
    Nodes,
    OnCircle,
    PointForce,
    Pressure,
    Segment,
    Shear,
    Spin,
    TemperatureChange,
    TotalForce,
    TotalMoment,
    Traction,
)

T = 2.0  # thickness of the test plates [L]
RHO = 7.85e-9
ALL_KINDS = ELEMENTS + MIXED
RIGHT = Named("right")


def _resolve(mesh: Mesh, loads: Sequence[Load], **job: object) -> Loads:
    return resolve_loads(build_model(plate_job((), loads, **job), mesh))  # type: ignore[arg-type]


def _resultant(mesh: Mesh, forces: np.ndarray, about: tuple[float, float] = (0.0, 0.0)):
    """Force and moment of nodal forces (N, 2)."""
    arm = mesh.nodes - about
    moment = (arm[:, 0] * forces[:, 1] - arm[:, 1] * forces[:, 0]).sum()
    return np.array([*forces.sum(axis=0), moment])


def _plate(kind: str) -> Mesh:
    """4 x 3, straight sides, with inner nodes moved."""
    return grid(kind, 4, 3, size=(4.0, 3.0), shape=_move_inside, straight=True, shuffle=8)


def _move_inside(x: np.ndarray, y: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    bubble = np.sin(np.pi * x / 4) * np.sin(np.pi * y / 3)
    return x + 0.2 * bubble, y - 0.15 * bubble


# Force and moment about the origin of each load on the plate 0..4 x 0..3, thickness 2, by hand.
# The right side x = 4 runs from (4, 0) to (4, 3); its outward normal is (1, 0), its tangent (0, 1).
CASES = {
    "point force": (PointForce(on=Named("NE"), force=(3.0, -2.0)), (3, -2, 4 * -2 - 3 * 3)),
    "total force": (TotalForce(on=RIGHT, force=(6.0, 9.0)), (6, 9, 4 * 9 - 1.5 * 6)),
    "total moment": (TotalMoment(on=RIGHT, moment=7.0), (0, 0, 7)),
    "traction": (Traction(on=RIGHT, start=(5, -1), end=(5, -1)), (30, -6, 4 * -6 - 1.5 * 30)),
    "growing traction": (
        # 0 at y = 0 to 5 at y = 3: 2 * 5 * 3 / 2 = 15 at y = 2
        Traction(on=RIGHT, start=(0, 0), end=(5, 0)),
        (15, 0, -2 * 15),
    ),
    "pressure": (Pressure(on=RIGHT, start=4, end=4), (-24, 0, 1.5 * 24)),
    "varying pressure": (
        # 1 to 3 over 3: mean 2 -> 12, of which 6 at 1.5 and 6 at 2
        Pressure(on=RIGHT, start=1, end=3),
        (-12, 0, 6 * 1.5 + 6 * 2),
    ),
    "pressure on top": (Pressure(on=Named("top"), start=1, end=1), (0, -8, -2 * 8)),
    "varying pressure on top": (
        # The top runs from (4, 3) to (0, 3): 0 at x = 4, 6 at x = 0, so 24 at x = 4/3.
        Pressure(on=Named("top"), start=0, end=6),
        (0, -24, -24 * 4 / 3),
    ),
    "shear": (Shear(on=RIGHT, start=5, end=5), (0, 30, 4 * 30)),
    "varying shear": (Shear(on=Named("bottom"), start=2, end=0), (8, 0, 0)),
    "line load": (LineLoad(on=RIGHT, start=(1, 2), end=(1, 2)), (3, 6, 4 * 6 - 1.5 * 3)),
    "growing line load": (LineLoad(on=RIGHT, start=(0, 0), end=(0, 4)), (0, 6, 4 * 6)),
    "acceleration": (
        Acceleration(acceleration=(0, -9810)),
        (0, -9810 * RHO * T * 12, -9810 * RHO * T * 12 * 2),
    ),
    "body force": (BodyForce(force=(1.0, 2.0)), (24, 48, 2 * 48 - 1.5 * 24)),
    "spin": (
        # omega^2 times mass times the centroid's offset (2 - 1, 1.5 - 1); through the centroid of
        # the plate, so about the origin 2 Fy - 1.5 Fx (the product of inertia is symmetric).
        Spin(about=(1, 1), speed=10),
        tuple(100 * RHO * T * 12 * f for f in (1, 0.5, 0.5 * 1 - 1 * 1)),
    ),
}


@pytest.mark.parametrize("kind", ALL_KINDS)
@pytest.mark.parametrize("name", CASES)
def test_resultant_is_the_hand_sum(name: str, kind: str) -> None:
    mesh = _plate(kind)
    load, expected = CASES[name]
    applied = _resolve(mesh, [load]).applied[:, :, 0]
    scale = np.abs(applied).sum() * 5
    np.testing.assert_allclose(_resultant(mesh, applied), expected, atol=1e-12 * scale)


@pytest.mark.parametrize("kind", ALL_KINDS)
@pytest.mark.parametrize("force", [(0.0, 80.0), (-30.0, 5.0), (3.0, -4.0)])
def test_bearing_carries_exactly_the_force_through_the_centre(
    kind: str, force: tuple[float, float]
) -> None:
    mesh = ring(kind, 14, 2, 10.0, 25.0)
    applied = _resolve(mesh, [Bearing(on=Named("bore"), force=force)]).applied[:, :, 0]
    np.testing.assert_allclose(
        _resultant(mesh, applied), [*force, 0.0], atol=1e-12 * np.hypot(*force) * 10
    )


def test_bearing_pressure_is_the_cosine_on_the_loaded_half() -> None:
    """p = 2 F cos(phi) / (pi R t): the pressure whose resultant over the half circle is F."""
    R, F = 10.0, 100.0
    mesh = ring("Q8", 96, 1, R, 12.0)
    applied = _resolve(mesh, [Bearing(on=Named("bore"), force=(F, 0.0))]).applied[:, :, 0]
    nodes = mesh.facet_nodes(mesh.sides["bore"])
    x = mesh.nodes[nodes, 0] / R
    np.testing.assert_allclose(applied[nodes[x < -0.05]], 0.0)
    # Consistent nodal forces of corners and mid-sides are 1/6 and 4/6 of p ds on both sides.
    ds = 2 * np.pi * R / 96
    p = 2 * F / (np.pi * R) * np.maximum(x, 0)
    corner = np.zeros(mesh.node_count, bool)
    corner[mesh.facet_ends(mesh.sides["bore"])] = True
    weight = np.where(corner[nodes], 2 / 6, 4 / 6)
    size = np.linalg.norm(applied[nodes], axis=1)
    # The load starts inside a facet at the edge of contact; 1e-3 of the peak elsewhere.
    np.testing.assert_allclose(size, p * ds * weight, atol=1.5e-3 * p.max() * ds)


def test_bearing_on_a_circle_selector_equals_the_named_hole() -> None:
    mesh = ring("Q8", 16, 2, 10.0, 25.0)
    target = OnCircle(centre=(0, 0), radius=10.0)
    named, circle = (
        _resolve(mesh, [Bearing(on=on, force=(0.0, 5.0))]).applied for on in (Named("bore"), target)
    )
    np.testing.assert_allclose(named, circle, atol=1e-14)


def test_circle_through_points_is_found() -> None:
    angle = np.array([0.3, 1.1, 2.0, 2.9])
    points = np.column_stack((7 + 3 * np.cos(angle), -2 + 3 * np.sin(angle)))
    centre, radius = fit_circle(points)
    np.testing.assert_allclose([*centre, radius], [7, -2, 3], rtol=1e-12)


def test_quadratic_side_shares_a_uniform_load_one_four_one() -> None:
    """Simpson's weights: the integral of the quadratic shape functions."""
    mesh = grid("Q8", 1, 1)
    applied = _resolve(mesh, [LineLoad(on=RIGHT, start=(6.0, 0), end=(6.0, 0))]).applied
    by_height = dict(zip(mesh.nodes[:, 1], applied[:, 0, 0], strict=True))
    on_right = {y: f for (x, y), f in zip(mesh.nodes, applied[:, 0, 0], strict=True) if x == 1.0}
    assert by_height.keys() >= on_right.keys()
    np.testing.assert_allclose([on_right[0.0], on_right[0.5], on_right[1.0]], [1, 4, 1])


def test_linear_side_shares_a_triangular_load_one_to_two() -> None:
    """Integrals of (1 - s) s and s^2: 1/6 and 1/3 of q L."""
    mesh = grid("Q4", 1, 1)
    applied = _resolve(mesh, [LineLoad(on=RIGHT, start=(0, 0), end=(6.0, 0))]).applied[:, 0, 0]
    assert applied[mesh.points["SE"]] == pytest.approx(1.0)
    assert applied[mesh.points["NE"]] == pytest.approx(2.0)


@pytest.mark.parametrize("kind", ALL_KINDS)
def test_free_expansion_has_no_resultant(kind: str) -> None:
    mesh = grid(kind, 4, 3, shape=warp)
    model = build_model(plate_job((), [TemperatureChange(change=50.0)]), mesh)
    loads = resolve_loads(model)
    forces = np.zeros((mesh.node_count, 2, 1))
    loads.heating.add_forces(forces, slice(0, 1), np.arange(mesh.node_count))
    assert np.abs(forces).max() > 1.0
    np.testing.assert_allclose(_resultant(mesh, forces[:, :, 0]), 0, atol=1e-9)
    assert not loads.applied.any()


def test_temperatures_of_overlapping_areas_add_up_by_case() -> None:
    mesh = grid("Q4", 4, 1, region_of_column=[0, 0, 1, 1], regions=("plate", "web"))
    web = TemperatureChange(on=Named("web"), change=5.0)
    whole = TemperatureChange(change=20.0)
    job = plate_job((), {"a": [whole, web], "b": [web, web], "c": []}, regions=(Region("web"),))
    temperature = resolve_loads(build_model(job, mesh)).heating.by_element(build_model(job, mesh))
    assert temperature is not None
    np.testing.assert_array_equal(
        temperature[0], [[20, 0, 0], [20, 0, 0], [25, 10, 0], [25, 10, 0]]
    )


def test_no_temperature_field_without_temperature_loads() -> None:
    mesh = grid("Q4", 1, 1)
    model = build_model(plate_job((), [BodyForce(force=(1, 0))]), mesh)
    assert resolve_loads(model).heating.by_element(model) is None


def test_load_of_a_region_acts_on_it_alone() -> None:
    """The web is half of the plate and 3 thick: volume 3 x 2 x 1."""
    mesh = grid(
        "Q8", 4, 1, size=(4.0, 1.0), region_of_column=[0, 0, 1, 1], regions=("plate", "web")
    )
    load = BodyForce(on=Named("web"), force=(0.0, 1.0))
    applied = _resolve(mesh, [load], regions=(Region("web", thickness=3.0),)).applied[:, :, 0]
    np.testing.assert_allclose(_resultant(mesh, applied), [0, 6, 18])


def test_pressure_acts_on_the_thickness_of_each_region() -> None:
    """Bottom: 2 long with 2 thick and 2 long with 3 thick."""
    mesh = grid(
        "Q4", 4, 1, size=(4.0, 1.0), region_of_column=[0, 0, 1, 1], regions=("plate", "web")
    )
    load = Pressure(on=Named("bottom"), start=1.0, end=1.0)
    applied = _resolve(mesh, [load], regions=(Region("web", thickness=3.0),)).applied[:, :, 0]
    np.testing.assert_allclose(_resultant(mesh, applied), [0, 4 + 6, 4 * 1 + 6 * 3])


def test_loads_go_to_their_own_case_and_add_up() -> None:
    mesh = grid("T6", 2, 2)
    push = TotalForce(on=RIGHT, force=(1.0, 0.0))
    job = plate_job((), {"one": [push], "none": [], "three": [push, push, push]})
    applied = resolve_loads(build_model(job, mesh)).applied
    np.testing.assert_allclose(applied.sum(axis=0)[0], [1, 0, 3])


def test_segment_selector_loads_the_boundary_on_it() -> None:
    mesh = _plate("Q8")
    segment = Segment(start=(4, 0), end=(4, 3))
    applied = _resolve(mesh, [Pressure(on=segment, start=4, end=4)]).applied[:, :, 0]
    np.testing.assert_allclose(_resultant(mesh, applied), [-24, 0, 36], atol=1e-10)


FAULTS = {
    "force on a side": (PointForce(on=RIGHT, force=(1, 0)), "total_force"),
    "side load at a point": (TotalForce(on=Named("NE"), force=(1, 0)), "only points"),
    "side load on a region": (Pressure(on=Named("plate"), start=1, end=1), "is a region"),
    "side load nowhere": (TotalForce(force=(1, 0)), "needs `on`"),
    "area load on a side": (BodyForce(on=RIGHT, force=(1, 0)), "acts on an area"),
    "unknown name": (TotalForce(on=Named("rihgt"), force=(1, 0)), "right"),
    "bearing on a straight side": (Bearing(on=RIGHT, force=(1, 0)), "not one"),
    "missing node": (PointForce(on=Nodes((10**6,)), force=(1, 0)), "1000000"),
    "empty box": (BodyForce(on=Box((9, 9), (10, 10)), force=(1, 0)), "box"),
}


@pytest.mark.parametrize("name", FAULTS)
def test_load_that_cannot_act_is_a_fault_at_its_place(name: str) -> None:
    load, words = FAULTS[name]
    placed = type(load)(**{**vars(load), "pointer": "/load_cases/x/0"})
    with pytest.raises(MeshError, match=words) as caught:
        _resolve(_plate("Q4"), [placed])
    assert caught.value.faults[0].pointer.startswith("/load_cases/x/0")


def test_all_faulty_loads_are_reported_together() -> None:
    loads = [load for load, _ in FAULTS.values()]
    with pytest.raises(MeshError) as caught:
        _resolve(_plate("Q4"), loads)
    assert len(caught.value.faults) == len(FAULTS)


@pytest.mark.parametrize(
    ("load", "words"),
    [
        (Acceleration(acceleration=(0, -1)), "density of material 'steel'"),
        (Spin(about=(0, 0), speed=1), "density of material 'steel'"),
        (TemperatureChange(change=1), "thermal expansion of material 'steel'"),
    ],
)
def test_missing_property_is_named(load: Load, words: str) -> None:
    with pytest.raises(MeshError, match=words):
        _resolve(_plate("Q4"), [load], density=None, thermal_expansion=None)


def test_pressure_between_two_regions_is_refused() -> None:
    mesh = grid("Q4", 4, 1, region_of_column=[0, 0, 1, 1], regions=("plate", "web"))
    border = np.array([[0, 1, 1]], np.int32)
    mesh = Mesh(mesh.nodes, mesh.blocks, mesh.regions, {"border": border})
    load = Pressure(on=Named("border"), start=1, end=1)
    with pytest.raises(MeshError, match="both sides"):
        _resolve(mesh, [load], regions=(Region("web"),))


def test_varying_load_on_separate_pieces_is_refused() -> None:
    mesh = _plate("Q4")
    sides = {"both": np.concatenate((mesh.sides["left"], mesh.sides["right"]))}
    mesh = Mesh(mesh.nodes, mesh.blocks, mesh.regions, sides)
    with pytest.raises(MeshError, match="one connected side"):
        _resolve(mesh, [Pressure(on=Named("both"), start=0, end=1)])


def test_moment_on_a_curved_side_is_refused() -> None:
    with pytest.raises(MeshError, match="straight side"):
        _resolve(ring("Q8", 12, 1, 1.0, 2.0), [TotalMoment(on=Named("bore"), moment=1.0)])


def test_bearing_on_the_outside_of_a_ring_is_refused() -> None:
    with pytest.raises(MeshError, match="bulges outwards"):
        _resolve(ring("Q8", 12, 1, 1.0, 2.0), [Bearing(on=Named("rim"), force=(1, 0))])


def test_forces_can_be_written_out_for_some_nodes_or_cases_only() -> None:
    """Whatever is asked for is a part of the whole."""
    mesh = grid("Q8", 4, 1, region_of_column=[0, 0, 1, 1], regions=("plate", "web"))
    loads = {
        "side": [TotalForce(on=RIGHT, force=(1.0, 2.0))],
        "all": [BodyForce(force=(3.0, 4.0)), Spin(about=(0.2, 0.1), speed=1e5)],
        "web": [Acceleration(on=Named("web"), acceleration=(0.0, -1e9))],
    }
    model = build_model(plate_job((), loads, regions=(Region("web"),)), mesh)
    found = resolve_loads(model)
    whole = found.applied
    nodes = np.array([7, 0, 11])
    order = np.random.default_rng(2).permutation(mesh.node_count)
    np.testing.assert_allclose(found.forces.at(nodes), whole[nodes], atol=1e-12)
    np.testing.assert_allclose(
        found.forces.of_cases(slice(1, 3), order), whole[order][:, :, 1:3], atol=1e-12
    )
    assert found.forces.at(nodes[:0]).shape == (0, 2, 3)
