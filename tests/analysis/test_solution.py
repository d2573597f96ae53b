"""The whole solution: statics for every load and support, mechanisms named, many cases at once."""

import dataclasses

import numpy as np
import pytest
from scipy.sparse import csr_array

from tests.plates import ELEMENTS, MIXED, grid, plate_job, ring, warp
from workers.analysis.mesh import Block, Mesh
from workers.analysis.solution import Solution, solve
from workers.analysis.solver import Plan, SuperLUFactor
from workers.errors import AnalysisError, MechanismError
from workers.geometry import Region
from workers.job import (
    Acceleration,
    Bearing,
    BodyForce,
    LineLoad,
    Load,
    Named,
    PointForce,
    Pressure,
    Shear,
    Spin,
    Spring,
    Support,
    TemperatureChange,
    TotalForce,
    TotalMoment,
    Traction,
)

LEFT, RIGHT, BOTTOM, TOP = (Named(name) for name in ("left", "right", "bottom", "top"))
SW, SE, NW = (Named(name) for name in ("SW", "SE", "NW"))
CLAMP = Support("clamp", LEFT, ux=0.0, uy=0.0)

LOADS: dict[str, Load] = {
    "point force": PointForce(on=Named("NE"), force=(300.0, -200.0)),
    "total force": TotalForce(on=RIGHT, force=(600.0, 900.0)),
    "total moment": TotalMoment(on=RIGHT, moment=70.0),
    "traction": Traction(on=TOP, start=(5, -1), end=(0, 3)),
    "pressure": Pressure(on=RIGHT, start=4, end=1),
    "shear": Shear(on=BOTTOM, start=5, end=2),
    "line load": LineLoad(on=TOP, start=(1, 2), end=(4, -2)),
    "acceleration": Acceleration(acceleration=(2e6, -9.81e6)),
    "body force": BodyForce(force=(1.0, 2.0)),
    "spin": Spin(about=(-1, 0.4), speed=1e4),
    "temperature": TemperatureChange(change=60.0),
}
SUPPORTS: dict[str, list[Support]] = {
    "clamped side": [CLAMP],
    "pin and roller": [Support("pin", SW, ux=0.0, uy=0.0), Support("roller", SE, uy=0.0)],
    "skew roller": [
        Support("pin", SW, ux=0.0, uy=0.0),
        Support("skew", NW, along=(2.0, 1.0)),
    ],
    "rollers on sides": [Support("wall", LEFT, normal=0.0), Support("floor", BOTTOM, normal=0.0)],
    "side spring": [Support("bed", BOTTOM, spring=Spring(x=3e3, y=5e4))],
    "normal spring": [
        Support("bed", BOTTOM, spring=Spring(normal=4e3, tangential=50.0)),
        Support("wall", LEFT, ux=0.0),
    ],
    "point springs": [
        Support("a", SW, spring=Spring(x=1e3, y=1e5)),
        Support("b", SE, spring=Spring(y=2e4)),
        Support("skew", NW, along=(1.0, -1.0)),
    ],
    "settlement": [
        Support("pin", SW, ux=0.01, uy=-0.02),
        Support("roller", SE, uy=0.03),
        Support("spring", NW, spring=Spring(x=1e3)),
    ],
    "two directions at one node": [
        Support("one", SW, along=(1.0, 0.2), displacement=0.01),
        Support("two", SW, along=(0.3, 1.0)),
        Support("spring", TOP, spring=Spring(x=10.0, y=10.0)),
    ],
}


def _resultant(mesh: Mesh, nodes: np.ndarray, force: np.ndarray) -> np.ndarray:
    """Force and moment about the origin of (k, 2, c) forces: (3, c)."""
    x, y = mesh.nodes[nodes].T[:, :, None]
    return np.array([*force.sum(axis=0), (x * force[:, 1] - y * force[:, 0]).sum(axis=0)])


def _out_of_balance(solution: Solution) -> float:
    """Applied plus support forces in x, y and moment, over the sum of the forces' sizes.

    Heating of a plate that is free to expand calls up no force at all; it is measured by the
    force that it would call up in a held plate, E alpha dT t times a side.
    """
    mesh = solution.model.mesh
    total = _resultant(mesh, np.arange(mesh.node_count), solution.applied)
    size = np.abs(solution.applied).sum(axis=(0, 1))
    if solution.temperature is not None:
        size = size + 210e3 * 1.2e-5 * np.abs(solution.temperature[0]).max(axis=0) * 2.0
    for support in solution.support_forces:
        total += _resultant(mesh, support.nodes, support.force)
        size += np.abs(support.force).sum(axis=(0, 1))
    return float((np.abs(total) / size).max())


@pytest.mark.parametrize("kind", ELEMENTS + MIXED)
@pytest.mark.parametrize("held", SUPPORTS)
def test_applied_and_support_forces_balance(held: str, kind: str) -> None:
    """Statics, for every load type on every support type."""
    mesh = grid(kind, 6, 4, size=(1.5, 1.0), shape=warp, straight=True, shuffle=6)
    # A warped side is not straight, so the moment goes to one of its facets.
    moment_side = mesh.sides["right"][:1]
    mesh = dataclasses.replace(mesh, sides={**mesh.sides, "facet": moment_side})
    loads = {name: [load] for name, load in LOADS.items()}
    loads["total moment"] = [TotalMoment(on=Named("facet"), moment=70.0)]
    solution = solve(plate_job(SUPPORTS[held], loads), mesh)
    assert _out_of_balance(solution) < 1e-9
    assert solution.solver.residual.max() < 1e-10


@pytest.mark.parametrize("kind", ELEMENTS)
def test_ring_on_a_bearing_balances(kind: str) -> None:
    mesh = ring(kind, 16, 2, 10.0, 25.0)
    supports = [Support("rim", Named("rim"), spring=Spring(normal=100.0, tangential=10.0))]
    solution = solve(plate_job(supports, [Bearing(on=Named("bore"), force=(30.0, 70.0))]), mesh)
    assert _out_of_balance(solution) < 1e-9


def test_node_held_by_two_supports_counts_once() -> None:
    """The corner belongs to the first support; both together carry the whole load."""
    mesh = grid("Q8", 4, 4)
    push = [TotalForce(on=RIGHT, force=(0.0, -10.0))]
    overlapping = [CLAMP, Support("floor", BOTTOM, uy=0.0)]
    solution = solve(plate_job(overlapping, push), mesh)
    total = sum(support.force.sum(axis=0) for support in solution.support_forces)
    np.testing.assert_allclose(np.ravel(total), [0, 10], atol=1e-9)
    floor = solution.support_forces[1]
    assert mesh.points["SW"] not in floor.nodes


# --- against other solutions -------------------------------------------------------------------


@pytest.mark.parametrize("kind", ["Q4", "T6", "T6+Q8"])
def test_displacements_equal_a_dense_solution(kind: str) -> None:
    """Dense elimination on the unreduced matrix with the held dofs cut out."""
    mesh = grid(kind, 4, 3, shape=warp, shuffle=9)
    job = plate_job([CLAMP], [TotalForce(on=RIGHT, force=(50.0, 20.0))])
    solution = solve(job, mesh)
    K = np.zeros((mesh.dof_count, mesh.dof_count))
    for number, (block, section) in enumerate(
        zip(mesh.blocks, solution.model.sections, strict=True)
    ):
        for nodes, k in zip(
            block.connectivity,
            block.element.stiffness(mesh.coords(number), section.constitutive, section.thickness),
            strict=True,
        ):
            dofs = (2 * nodes[:, None] + np.arange(2)).ravel()
            K[np.ix_(dofs, dofs)] += k
    free = np.ones((mesh.node_count, 2), bool)
    free[mesh.facet_nodes(mesh.sides["left"])] = False
    f = free.ravel()
    expected = np.zeros(mesh.dof_count)
    expected[f] = np.linalg.solve(K[np.ix_(f, f)], solution.applied[:, :, 0].ravel()[f])
    found = solution.displacement[:, :, 0].ravel()
    np.testing.assert_allclose(found, expected, atol=1e-11 * np.abs(expected).max())


@pytest.mark.parametrize("kind", ELEMENTS)
def test_skew_supports_equal_the_turned_problem(kind: str) -> None:
    """The same plate turned by 30 degrees, with its rollers turned along."""
    c, s = np.cos(np.pi / 6), np.sin(np.pi / 6)
    R = np.array([[c, -s], [s, c]])
    upright = grid(kind, 4, 3, shape=warp)
    turned = dataclasses.replace(upright, nodes=upright.nodes @ R.T)
    load, pulled = np.array([30.0, -70.0]), 0.02

    def solved(mesh: Mesh, axes: np.ndarray) -> np.ndarray:
        x, y = axes.T
        supports = [
            Support("wall", LEFT, along=tuple(x)),
            Support("corner", SW, along=tuple(y)),
            Support("pull", SE, along=tuple(y), displacement=pulled),
        ]
        force = TotalForce(on=TOP, force=tuple(axes @ load))
        return solve(plate_job(supports, [force]), mesh).displacement[:, :, 0]

    expected = solved(upright, np.eye(2)) @ R.T
    np.testing.assert_allclose(solved(turned, R), expected, atol=1e-11 * np.abs(expected).max())


def test_springs_in_series_by_hand() -> None:
    """A bar E A / L between two springs: 1/k = 1/k1 + L/(E A), nu = 0; displacement F/k."""
    E, length, height, t = 200.0, 4.0, 1.0, 2.0
    k1, F = 25.0, 10.0
    mesh = grid("Q8", 4, 1, size=(length, height))
    supports = [
        Support("spring", LEFT, spring=Spring(x=k1 / height)),
        Support("guide", BOTTOM, uy=0.0),
    ]
    job = plate_job(
        supports,
        [TotalForce(on=RIGHT, force=(F, 0.0))],
        youngs_modulus=E,
        poissons_ratio=0.0,
        thickness=t,
    )
    solution = solve(job, mesh)
    right = mesh.facet_nodes(mesh.sides["right"])
    left = mesh.facet_nodes(mesh.sides["left"])
    np.testing.assert_allclose(solution.displacement[left, 0, 0], F / k1, rtol=1e-11)
    expected = F / k1 + F * length / (E * height * t)
    np.testing.assert_allclose(solution.displacement[right, 0, 0], expected, rtol=1e-11)
    np.testing.assert_allclose(solution.support_forces[0].force.sum(axis=0), [[-F], [0]], atol=1e-9)


@pytest.mark.parametrize("kind", ELEMENTS)
def test_prescribed_rigid_motion_costs_no_force(kind: str) -> None:
    """Three nodes moved as a rigid body carry all others along: u = t + omega x r."""
    mesh = grid(kind, 3, 3, shape=warp)
    t, omega = np.array([0.3, -0.1]), 1e-3
    motion = t + omega * np.column_stack((-mesh.nodes[:, 1], mesh.nodes[:, 0]))
    supports = [
        Support(name, Named(name), ux=motion[mesh.points[name], 0], uy=motion[mesh.points[name], 1])
        for name in ("SW", "SE")
    ]
    solution = solve(plate_job(supports, {"none": []}), mesh)
    np.testing.assert_allclose(solution.displacement[:, :, 0], motion, atol=1e-12)
    for support in solution.support_forces:
        # Against E t times the displacement, the size of the forces that cancel.
        np.testing.assert_allclose(support.force, 0, atol=1e-12 * 210e3 * 2.0 * 0.3 * 10)


def test_value_prescribed_in_one_case_is_zero_in_the_others() -> None:
    mesh = grid("Q4", 2, 2)
    pulled = Support("jack", RIGHT, ux=0.5, case="pull")
    solution = solve(plate_job([CLAMP, pulled], {"rest": [], "pull": []}), mesh)
    right = mesh.facet_nodes(mesh.sides["right"])
    np.testing.assert_array_equal(solution.displacement[:, :, 0], 0)
    np.testing.assert_allclose(solution.displacement[right, 0, 1], 0.5)


def test_cases_solved_together_equal_cases_solved_alone() -> None:
    mesh = grid("T6", 5, 3, shape=warp)
    together = solve(
        plate_job(
            SUPPORTS["settlement"], {k: [v] for k, v in LOADS.items() if k != "total moment"}
        ),
        mesh,
    )
    for number, name in enumerate(together.cases):
        alone = solve(plate_job(SUPPORTS["settlement"], {name: [LOADS[name]]}), mesh)
        np.testing.assert_allclose(
            together.displacement[:, :, number], alone.displacement[:, :, 0], rtol=1e-9, atol=1e-13
        )


def test_many_cases_are_solved_in_blocks(monkeypatch: pytest.MonkeyPatch) -> None:
    """Blocks of eight give what one block gives: here case k is k times the first."""
    monkeypatch.setattr("workers.analysis.solution.BLOCK_BYTES", 1)
    mesh = grid("Q8", 3, 3)
    loads = {str(k): [TotalForce(on=RIGHT, force=(1.0 * k, 2.0 * k))] for k in range(1, 20)}
    solution = solve(plate_job([CLAMP], loads), mesh)
    first = solution.displacement[:, :, :1]
    np.testing.assert_allclose(
        solution.displacement, first * np.arange(1, 20), rtol=1e-10, atol=1e-16
    )


@pytest.mark.parametrize("kind", ELEMENTS + MIXED)
def test_multifrontal_and_superlu_agree(kind: str) -> None:
    """The library's factor on the same order is the cross-check of our own."""
    mesh = grid(kind, 12, 8, shape=warp, shuffle=4)
    job = plate_job(SUPPORTS["settlement"], {"a": [LOADS["spin"]], "b": [LOADS["traction"]]})
    ours, library = (solve(job, mesh, method=name) for name in ("multifrontal", "superlu"))
    assert (ours.solver.name, library.solver.name) == ("multifrontal Cholesky", "SuperLU")
    np.testing.assert_allclose(
        ours.displacement, library.displacement, atol=1e-9 * np.abs(ours.displacement).max()
    )


class _Sloppy:
    """A factor that is wrong by a percent, or by half."""

    name, entries = "sloppy", 1

    def __init__(self, matrix: csr_array, error: float) -> None:
        self._sound, self._error = SuperLUFactor(matrix), error

    def solve(self, block: np.ndarray) -> np.ndarray:
        return self._sound.solve(block) * (1 + self._error)


@pytest.mark.parametrize(
    ("error", "name"), [(1e-8, "sloppy"), (0.5, "SuperLU")], ids=["refined", "replaced"]
)
def test_poor_factor_is_refined_once_and_then_replaced(
    error: float, name: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(Plan, "factorise", lambda _, matrix, _motions: _Sloppy(matrix, error))
    mesh = grid("Q8", 4, 4)
    job = plate_job([CLAMP], [TotalForce(on=RIGHT, force=(1.0, 2.0))])
    solution = solve(job, mesh)
    monkeypatch.undo()
    assert solution.solver.name == name
    assert solution.solver.refinements == 1
    assert solution.solver.residual[0] < 1e-10
    expected = solve(job, mesh).displacement
    np.testing.assert_allclose(solution.displacement, expected, atol=1e-10 * np.abs(expected).max())


# --- the report --------------------------------------------------------------------------------


def test_report_counts_dofs_and_stages() -> None:
    mesh = grid("Q8", 3, 3)
    stages: list[tuple[str, float]] = []
    solution = solve(
        plate_job([CLAMP], {"a": [], "b": [LOADS["body force"]]}),
        mesh,
        lambda stage, fraction: stages.append((stage, fraction)),
    )
    report = solution.solver
    assert report.dofs == 2 * mesh.node_count
    assert report.free_dofs == report.dofs - 2 * 7  # seven nodes on the left side
    assert report.residual.shape == (2,)
    assert report.residual[0] == 0
    assert 0 < report.residual[1] < 1e-10
    assert report.factor_entries > report.dofs
    assert 1e-6 < report.reciprocal_condition < 1
    assert list(dict.fromkeys(stage for stage, _ in stages)) == [
        "assembling",
        "factorising",
        "solving",
    ]
    assert stages[-1] == ("solving", 1.0)
    assert all(seconds >= 0 for seconds in report.seconds.values())


def test_temperature_is_reported_by_element_and_case() -> None:
    mesh = grid("T3+Q4", 4, 2, region_of_column=[0, 0, 1, 1], regions=("plate", "web"))
    job = plate_job(
        [CLAMP],
        {"hot": [TemperatureChange(on=Named("web"), change=30.0)], "cold": []},
        regions=(Region("web"),),
    )
    temperature = solve(job, mesh).temperature
    assert temperature is not None
    np.testing.assert_array_equal(temperature[0], np.zeros((8, 2)))
    np.testing.assert_array_equal(temperature[1], np.tile([30.0, 0.0], (4, 1)))


def test_slender_strip_is_accepted_although_its_displacements_lose_digits() -> None:
    """1 to 300: F L^3 / (3 E I) within 1 % (shear adds nothing here); forces out of balance are
    far above 1e-10 of the load, and the backward error excuses them."""
    length = 300.0
    mesh = grid("Q8", 300, 1, size=(length, 1.0))
    solution = solve(plate_job([CLAMP], [TotalForce(on=RIGHT, force=(0.0, 1.0))]), mesh)
    tip = solution.displacement[mesh.points["SE"], 1, 0]
    assert tip == pytest.approx(length**3 / (3 * 210e3 * 2.0 / 12), rel=0.01)
    assert solution.solver.reciprocal_condition > 1e-14


def test_plate_on_a_spring_too_weak_for_its_digits_is_refused() -> None:
    """A spring of 1e-9 of the plate's stiffness: rounding leaves 1e-3 of the load unbalanced."""
    mesh = grid("Q8", 40, 40)
    supports = [
        Support("pin", SW, ux=0.0, uy=0.0),
        Support("hair", SE, spring=Spring(y=4e-4)),
    ]
    with pytest.raises(AnalysisError, match="reciprocal condition"):
        solve(plate_job(supports, [TotalForce(on=RIGHT, force=(0.0, 1.0))]), mesh)


# --- mechanisms --------------------------------------------------------------------------------

PUSH = [PointForce(on=Named("NE"), force=(1.0, 1.0))]


@pytest.mark.parametrize("kind", ELEMENTS)
@pytest.mark.parametrize(
    ("supports", "words"),
    [
        ([], "the plate"),
        ([Support("wall", LEFT, ux=0.0)], "move in y"),
        ([Support("pin", SW, ux=0.0, uy=0.0)], r"rotate about \(0, 0\)"),
        ([Support("spring", BOTTOM, spring=Spring(y=10.0))], "move in x"),
    ],
)
def test_free_plate_is_refused_and_its_motion_named(
    kind: str, supports: list[Support], words: str
) -> None:
    mesh = grid(kind, 3, 2, size=(3.0, 2.0))
    with pytest.raises(MechanismError, match=words) as caught:
        solve(plate_job(supports, PUSH), mesh)
    assert caught.value.faults[0].pointer == "/supports"


def test_free_part_is_named_among_supported_ones() -> None:
    one = grid("Q8", 2, 2)
    block = one.blocks[0]
    other = Block(block.element, block.connectivity + one.node_count, block.region)
    mesh = Mesh(
        np.concatenate((one.nodes, one.nodes + 5.0)),
        (block, other),
        one.regions,
        one.sides,
        one.points,
    )
    with pytest.raises(MechanismError, match=r"5\.5"):
        solve(plate_job([CLAMP], PUSH), mesh)


def _two_squares_at_a_corner(kind: str) -> Mesh:
    """Squares [0, 1]^2 and [1, 2]^2 that share the node (1, 1); the first has the side "left"."""
    whole = grid(kind, 2, 2, size=(2.0, 2.0))
    block = whole.blocks[0]
    middle = whole.nodes[block.connectivity].mean(axis=1)
    diagonal = (middle[:, 0] > 1) == (middle[:, 1] > 1)
    used, connectivity = np.unique(block.connectivity[diagonal], return_inverse=True)
    connectivity = connectivity.reshape(-1, block.connectivity.shape[1]).astype(np.int32)
    nodes = whole.nodes[used]
    hinged = Block(block.element, connectivity, np.zeros(2, np.int32))
    lower = int(np.flatnonzero(nodes[connectivity].mean(axis=1)[:, 0] < 1)[0])
    return Mesh(nodes, (hinged,), sides={"left": np.array([[0, lower, 3]], np.int32)})


@pytest.mark.parametrize("kind", ["Q4", "Q8"])
def test_plate_hinged_at_one_node_is_a_mechanism(kind: str) -> None:
    mesh = _two_squares_at_a_corner(kind)
    with pytest.raises(MechanismError, match=r"\(1, 1\)"):
        solve(plate_job([CLAMP], [BodyForce(force=(1.0, 0.0))]), mesh)


@pytest.mark.parametrize("kind", ["Q4", "Q8"])
@pytest.mark.parametrize(
    ("held", "words"),
    [
        ("hinge", r"rotate about \(1, 1\)"),
        ("pin", r"the plate can rotate about \(0, 0\)"),
        ("wall", r"the plate can slide along \(-?0, -?1\)"),
    ],
)
def test_numbers_alone_find_and_name_a_mechanism(
    kind: str, held: str, words: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Whatever the look at the supports might overlook, the factor shows."""
    monkeypatch.setattr("workers.analysis.solution.free_motions", lambda *_: [])
    mesh, supports = grid(kind, 4, 3), [Support("pin", SW, ux=0.0, uy=0.0)]
    if held == "hinge":
        mesh, supports = _two_squares_at_a_corner(kind), [CLAMP]
    if held == "wall":
        supports = [Support("wall", LEFT, ux=0.0)]
    with pytest.raises(MechanismError, match=words):
        solve(plate_job(supports, [BodyForce(force=(1.0, 0.0))]), mesh)
