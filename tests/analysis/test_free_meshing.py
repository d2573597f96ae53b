"""Free meshing: sizes that are asked for, points that become nodes, failures in plain words."""

import faulthandler
import os
import signal
import time
from collections.abc import Callable
from concurrent.futures import ProcessPoolExecutor
from dataclasses import replace
from itertools import count
from multiprocessing import get_context
from typing import Any

import numpy as np
import pytest

from elements.errors import UnknownElementError
from elements.registry import get
from tests.gallery import GALLERY, circle, drawn, hole, loop, rectangle
from tests.random_plates import scaled
from workers.analysis.mesh import Mesh
from workers.analysis.meshing import free, mesher
from workers.analysis.meshing.flat_mesh import FlatMesh
from workers.analysis.meshing.free import mesh_drawing
from workers.analysis.meshing.outline import draw
from workers.analysis.meshing.plan import plan_faults, plan_mesh
from workers.analysis.selection import select
from workers.errors import MeshError
from workers.job import Meshing, Named

Json = dict[str, Any]
ELEMENTS = ("T3", "T6", "Q4", "Q8")
PLATE = rectangle(0, 0, 200, 100)
PLATE[1] = {**PLATE[1], "side": "right"}
elements = pytest.mark.parametrize("element", ELEMENTS)
two_elements = pytest.mark.parametrize("element", ["T6", "Q4"])


def meshed(geometry: Json, element: str = "T6", **meshing: Any) -> Mesh:
    return mesh_drawing(draw(drawn(geometry)), Meshing(element=element, **meshing))


def plate(**parts: Any) -> Json:
    return {"outline": PLATE, **parts}


def lengths(mesh: Mesh) -> np.ndarray:
    """Of all element sides inside."""
    one, _ = mesh.shared_facets()
    return mesh.facet_lengths(one)


def side_lengths(mesh: Mesh, side: str) -> np.ndarray:
    return mesh.facet_lengths(mesh.sides[side])


def lengths_near(mesh: Mesh, x: float, y: float, reach: float) -> np.ndarray:
    """Of the element sides inside whose middle is that near."""
    one, _ = mesh.shared_facets()
    middle = mesh.nodes[mesh.facet_ends(one)].mean(axis=1)
    return mesh.facet_lengths(one)[np.linalg.norm(middle - (x, y), axis=1) < reach]


# --- sizes -------------------------------------------------------------------------------------


@elements
@pytest.mark.parametrize("size", [20.0, 10.0, 5.0])
def test_elements_have_the_size_that_is_asked_for(element: str, size: float) -> None:
    """The plate's sides are multiples of it."""
    made = lengths(meshed(plate(), element, size=size))
    assert 0.8 * size < np.median(made) < 1.2 * size
    assert made.max() < 2 * size


@elements
def test_default_size_gives_a_plate_the_usual_number_of_elements(element: str) -> None:
    """About 3000 linear or 800 quadratic triangles (half as many quadrilaterals) and a factor."""
    made = meshed(plate(), element)
    order, wanted = get(element).order, {1: 3000, 2: 800}
    triangles = made.element_count * (1 if get(element).is_triangle else 2)
    assert wanted[order] < triangles < 3 * wanted[order]


@two_elements
def test_side_gets_its_own_size_and_the_rest_keeps_the_general_one(element: str) -> None:
    made = meshed(plate(), element, size=20, sizes={"right": 2})
    assert side_lengths(made, "right").max() < 2.4
    assert np.median(lengths_near(made, 0, 50, 30)) > 14


def test_hole_gets_its_own_size() -> None:
    made = meshed(plate(holes=[hole("pin", 60, 50, 20)]), size=20, sizes={"pin": 1})
    assert 0.7 < np.median(side_lengths(made, "pin")) < 1.1


@two_elements
def test_region_gets_its_own_size(element: str) -> None:
    regions = [{"name": "boss", "thickness": 3, "outline": rectangle(120, 30, 40, 40)}]
    made = meshed(plate(regions=regions), element, size=20, sizes={"boss": 2})
    boss = made.regions.index("boss")
    elements_there = sum(int((block.region == boss).sum()) for block in made.blocks)
    # 1600 / (0.433 x 4) triangles, half as many quadrilaterals, within a factor of 1.6.
    wanted = 1600 / (0.433 * 4) / (1 if get(element).is_triangle else 2)
    assert wanted / 1.6 < elements_there < 1.6 * wanted
    assert np.median(lengths_near(made, 0, 50, 40)) > 6


@two_elements
@pytest.mark.parametrize("place", [[100, 50], [200, 60], [0, 0]])
def test_point_gets_its_own_size_and_it_grows_away_from_it(element: str, place: list[int]) -> None:
    """Inside, on an edge, in a corner."""
    made = meshed(plate(points={"gauge": place}), element, size=20, sizes={"gauge": 0.5})
    x, y = place
    assert np.median(lengths_near(made, x, y, 2)) < 1
    assert np.median(lengths_near(made, x, y, 10)) < 4
    far = 200 - x if x != 100 else 0
    assert np.median(lengths_near(made, far, 50, 30)) > 12


@elements
def test_arc_stays_an_arc_however_large_the_size(element: str) -> None:
    """At least 24 linear or 16 quadratic elements to the turn."""
    holes = [hole("pin", 60, 50, 20)]
    made = meshed(plate(holes=holes), element, size=100, sizes={"pin": 100})
    least = {1: 24, 2: 16}[get(element).order]
    assert least <= len(made.sides["pin"]) <= 1.5 * least


@elements
def test_default_resolves_curvature(element: str) -> None:
    """48 linear or 24 quadratic elements to the turn, though the plate is large."""
    made = meshed({"outline": rectangle(0, 0, 2000, 2000), "holes": [hole("pin", 999, 999, 9)]},
                  element)  # fmt: skip
    least = {1: 48, 2: 24}[get(element).order]
    assert least <= len(made.sides["pin"]) <= 1.3 * least


@elements
@pytest.mark.parametrize("gap", [3.0, 0.3, 0.03])
def test_ligament_has_elements_across(element: str, gap: float) -> None:
    """At least 3 linear triangles, or 2 others, through the gap between hole and edge."""
    made = meshed(plate(holes=[hole("pin", 100, 20 + gap, 20)]), element)
    table, hits = made.nodes[made.facet_ends(made.shared_facets()[0])], []
    for x in np.linspace(-0.2, 0.2, 21) * gap + 100:  # lines across, beside nodes and sides
        (ax, ay), (bx, by) = table[:, 0].T, table[:, 1].T
        crossed = (ax > x) != (bx > x)
        y = ay[crossed] + (x - ax[crossed]) / (bx - ax)[crossed] * (by - ay)[crossed]
        hits.append(1 + (y < gap).sum())
    assert np.mean(hits) >= (3 if element == "T3" else 2)


def test_slot_is_not_meshed_finer_for_being_narrow() -> None:
    """Nothing is between its sides; only its round ends are small."""
    narrow = [{"name": "slot", "outline": [
        *loop((50, 49.5), (150, 49.5), (150, 50.5), (50, 50.5))]}]  # fmt: skip
    made = meshed(plate(holes=narrow), size=10)
    assert np.median(lengths_near(made, 100, 50, 20)) > 4


def test_short_side_does_not_make_long_ones_fine() -> None:
    outline = loop((0, 0), (200, 0), (200, 50), (199.5, 50), (199.5, 100), (0, 100))
    made = meshed({"outline": outline}, size=10)
    assert lengths_near(made, 199.5, 50, 2).min() < 1
    assert np.median(lengths_near(made, 50, 50, 40)) > 8


# --- points ------------------------------------------------------------------------------------


@two_elements
def test_points_are_nodes_wherever_they_lie(element: str) -> None:
    """Inside, by the edge, close together, on the border of a region, on an arc, in a corner."""
    points = {
        "free": [150, 50], "by the edge": [30, 0.05], "one": [100, 80], "other": [100.1, 80],
        "rim": [80, 50], "heart": [60, 52], "edge": [33, 0], "corner": [200, 100],
        "same": [150, 50],
    }  # fmt: skip
    regions = [{"name": "boss", "thickness": 3, **circle(60, 50, 20)}]
    made = meshed(plate(points=points, regions=regions), element)
    for name, place in points.items():
        assert made.nodes[made.points[name]].tolist() == pytest.approx(place, abs=1e-12)
        used = sum(int((block.connectivity == made.points[name]).any()) for block in made.blocks)
        assert used
        assert select(made, Named(name), "").nodes.tolist() == [made.points[name]]


def test_many_points_close_together_are_all_nodes() -> None:
    """A rosette of 25 gauges at a distance of a tenth of the element size."""
    points = {f"gauge {i} {j}": [100 + i, 50 + j] for i in range(5) for j in range(5)}
    made = meshed(plate(points=points), size=10)
    assert len(set(made.points.values())) == 25


# --- the same again ---------------------------------------------------------------------------


def assert_same(one: Mesh, other: Mesh, factor: float = 1.0, shift: float = 0.0) -> None:
    exact = factor == 1 and shift == 0
    np.testing.assert_allclose(
        (one.nodes + shift) * factor,
        other.nodes,
        rtol=0,
        atol=0 if exact else 1e-9 * other.diagonal,
    )
    for a, b in zip(one.blocks, other.blocks, strict=True):
        np.testing.assert_array_equal(a.connectivity, b.connectivity)
        np.testing.assert_array_equal(a.region, b.region)
    assert one.points == other.points
    for name, facets in one.sides.items():
        np.testing.assert_array_equal(facets, other.sides[name])


@two_elements
def test_same_drawing_gives_bitwise_the_same_mesh(element: str) -> None:
    """Here again, and in a process of its own."""
    first = meshed(GALLERY["lifting lug"], element)
    assert_same(first, meshed(GALLERY["lifting lug"], element))
    with ProcessPoolExecutor(1, mp_context=get_context("forkserver")) as pool:
        assert_same(first, pool.submit(meshed, GALLERY["lifting lug"], element).result())


@two_elements
@pytest.mark.parametrize("factor", [1 / 25.4, 1e-3, 12.0, 1 / 3])
def test_another_unit_gives_the_same_mesh(element: str, factor: float) -> None:
    one = meshed(GALLERY["keel cradle"], element, size=12)
    other = meshed(scaled(GALLERY["keel cradle"], factor), element, size=12 * factor)
    assert_same(one, other, factor)


def test_another_origin_gives_the_same_mesh() -> None:
    geometry = GALLERY["doubler plate"]
    moved = {
        "outline": [{**v, "at": [c + 12345.6 for c in v["at"]]} for v in geometry["outline"]],
        "holes": [hole("hawse", 150 + 12345.6, 100 + 12345.6, 35)],
        "regions": [
            {**geometry["regions"][0], "outline": rectangle(12420.6, 12380.6, 150, 130, 30)},
            {**geometry["regions"][1], **circle(12495.6, 12445.6, 48)},
        ],
    }
    assert_same(meshed(geometry), meshed(moved), shift=12345.6)


# --- what is refused -----------------------------------------------------------------------------


def test_element_that_is_not_installed_is_told() -> None:
    with pytest.raises(UnknownElementError, match="T7"):
        meshed(plate(), "T7")


@pytest.mark.parametrize(
    ("meshing", "pointer", "words"),
    [
        ({"size": 0.01}, "/meshing/size", r"about .* nodes; at most 1000000 nodes.*at least about"),
        ({"size": 1e-9}, "/meshing/size", r"too small.*223\.6 across; at least 0.00224"),
        ({"sizes": {"right": 1e-9}}, "/meshing/sizes/right", "too small"),
        ({"size": 5, "sizes": {"right": 6}}, "/meshing/sizes/right", "larger than the general"),
        ({"sizes": {"boss": 0.02}}, "/meshing/sizes/boss", "about .* elements"),
        ({"size": 50, "sizes": {"boss": 0.02}}, "/meshing/sizes/boss", "about .* elements"),
    ],
)
def test_absurd_size_is_refused_before_anything_is_meshed(
    meshing: Json, pointer: str, words: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Where a job is accepted, and by the mesher itself."""
    monkeypatch.setattr(free, "run_mesher", None)
    regions = [{"name": "boss", "thickness": 3, **circle(60, 50, 20)}]
    drawing = draw(drawn(plate(regions=regions)))
    asked = Meshing(element="Q8", **meshing)
    (fault,) = plan_faults(drawing, get("Q8"), asked)
    assert fault.pointer == pointer
    with pytest.raises(MeshError, match=words) as caught:
        mesh_drawing(drawing, asked)
    assert caught.value.faults == (fault,)


@pytest.mark.slow
@elements
@pytest.mark.parametrize("name", ["lifting lug", "comb", "perforated strip", "two-material strip"])
@pytest.mark.parametrize("size", [None, 2.0])
def test_estimate_comes_near_the_count(element: str, name: str, size: float | None) -> None:
    """Within a factor of 2.5, so that the limit means what it says."""
    drawing, meshing = draw(drawn(GALLERY[name])), Meshing(element=element, size=size)
    plan, made = plan_mesh(drawing, get(element), meshing), mesh_drawing(drawing, meshing)
    assert 0.4 < plan.elements / made.element_count < 2.5
    assert 0.4 < plan.nodes / made.node_count < 2.5


# --- when the library fails ---------------------------------------------------------------------


def crash(*_: Any, **__: Any) -> FlatMesh:
    faulthandler.disable()  # or pytest's prints a trace of the child
    os.kill(os.getpid(), signal.SIGSEGV)
    raise AssertionError("still alive")


def hang(*_: Any, **__: Any) -> FlatMesh:
    time.sleep(3600)
    raise AssertionError("nobody stopped this")


def run_out_of_memory(*_: Any, **__: Any) -> FlatMesh:
    np.ones(1 << 34)  # 128 GiB, which the child's limit refuses
    raise AssertionError("there was enough")


def give_up(*_: Any, **__: Any) -> FlatMesh:
    raise mesher.NgException("meshing failed")


@pytest.mark.parametrize(
    ("failure", "words"),
    [
        (crash, r"stopped without an answer \(exit status -11\)"),
        (hang, r"did not end within 0 s and was stopped"),
        (run_out_of_memory, "ran out of memory"),
        (give_up, "gave up: meshing failed"),
    ],
)
def test_failure_of_the_library_fails_the_mesh_with_its_reason(
    failure: Callable[..., FlatMesh], words: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(mesher, "mesh_here", failure)
    monkeypatch.setattr(free, "PATIENCE", 0.2)
    monkeypatch.setattr(free, "PER_ELEMENT", 0.0)
    with pytest.raises(
        MeshError, match=f"could not be meshed: the mesher {words}; try another"
    ) as e:
        meshed(plate())
    assert e.value.faults[0].pointer == "/geometry"


@pytest.mark.parametrize("element", ["T6", "Q8"])
def test_another_try_mends_a_failure(element: str, monkeypatch: pytest.MonkeyPatch) -> None:
    """The library fails once, for quadrilaterals in rows, or for the first triangles."""
    tries, run = count(), free.run_mesher

    def fail_first(*args: Any, **kwargs: Any) -> FlatMesh:
        if next(tries) == 0:
            raise mesher.MesherFailedError("the mesher gave up: meshing failed")
        return run(*args, **kwargs)

    monkeypatch.setattr(free, "run_mesher", fail_first)
    assert meshed(plate(), element).element_count > 100
    assert next(tries) == 2


@pytest.mark.parametrize("damage", ["lost", "moved"])
def test_mesh_that_is_not_whole_is_never_handed_on(
    damage: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    """One element of the library's mesh is missing, or all of one corner's are inside out."""
    run = free.run_mesher

    def spoil(*args: Any, **kwargs: Any) -> FlatMesh:
        mesh = run(*args, **kwargs)
        if damage == "lost":
            return replace(
                mesh, triangles=mesh.triangles[1:], triangle_domain=mesh.triangle_domain[1:]
            )
        nodes = mesh.nodes.copy()
        inner = np.setdiff1d(np.arange(len(nodes)), mesh.segments)
        nodes[inner] += 5.0
        return replace(mesh, nodes=nodes)

    monkeypatch.setattr(free, "run_mesher", spoil)
    with pytest.raises(MeshError, match="could not be meshed"):
        meshed(plate())
