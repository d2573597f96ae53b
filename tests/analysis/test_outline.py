"""Drawings against shapely: areas of all domains, fillets, shared borders, points.

`tests/shapes.py` works the same shapes out with chords of 2000 to the turn, which leaves out about
2e-6 of what an arc encloses; tolerances follow from that.
"""

from typing import Any

import numpy as np
import pytest

from tests.gallery import GALLERY, circle, drawn, hole, loop, polar, rectangle, slot
from tests.shapes import plate_polygon, polygon, region_polygons
from workers.analysis.meshing.corners import corners, sharp_corners
from workers.analysis.meshing.curves import Arc, enclosed
from workers.analysis.meshing.drawing import OUTSIDE, Drawing
from workers.analysis.meshing.outline import draw

Json = dict[str, Any]
CHORDS = 1e-5  # relative error of an area whose arcs are chords


def domain_areas(drawing: Drawing) -> dict[str, float]:
    areas = dict.fromkeys(drawing.regions, 0.0)
    for edge in drawing.edges:
        for domain, sign in ((edge.left, 1), (edge.right, -1)):
            if domain != OUTSIDE:
                areas[drawing.regions[domain - 1]] += sign * enclosed(edge.curve)
    return areas


@pytest.mark.parametrize("name", GALLERY)
def test_domains_of_the_gallery_have_the_areas_that_shapely_finds(name: str) -> None:
    drawing = draw(drawn(GALLERY[name]))
    found = domain_areas(drawing)
    expected = {n: p.area for n, p in region_polygons(GALLERY[name]).items() if not p.is_empty}
    assert found.keys() == expected.keys()
    whole = sum(expected.values())
    for region, area in expected.items():
        assert found[region] == pytest.approx(area, abs=CHORDS * whole)
    assert drawing.area == pytest.approx(plate_polygon(GALLERY[name]).area, rel=CHORDS)


@pytest.mark.parametrize("name", GALLERY)
def test_edges_meet_bitwise_and_close_around_every_domain(name: str) -> None:
    """In every vertex as many edges of a domain arrive as leave."""
    drawing = draw(drawn(GALLERY[name]))
    balance: dict[tuple[int, tuple[float, float]], int] = {}
    for edge in drawing.edges:
        for domain, start, end in (
            (edge.left, edge.start, edge.end),
            (edge.right, edge.end, edge.start),
        ):
            balance[domain, start] = balance.get((domain, start), 0) + 1
            balance[domain, end] = balance.get((domain, end), 0) - 1
    assert set(balance.values()) == {0}


def areas_of(**parts: Any) -> dict[str, float]:
    return domain_areas(draw(drawn({"outline": rectangle(0, 0, 200, 100), **parts})))


def test_region_may_be_a_ring_around_a_hole() -> None:
    areas = areas_of(
        holes=[hole("pin", 60, 50, 20)],
        regions=[{"name": "boss", "thickness": 3, **circle(60, 50, 30)}],
    )
    assert areas["boss"] == pytest.approx(np.pi * (30**2 - 20**2), rel=1e-12)
    assert areas["plate"] == pytest.approx(200 * 100 - np.pi * 30**2, rel=1e-12)


@pytest.mark.parametrize("order", [1, -1])
def test_of_nested_regions_the_inner_one_counts_whatever_the_order(order: int) -> None:
    regions = [
        {"name": "outer", "thickness": 3, **circle(60, 50, 30)},
        {"name": "inner", "thickness": 3, **circle(60, 50, 10)},
    ][::order]
    areas = areas_of(regions=regions)
    assert areas["inner"] == pytest.approx(np.pi * 100, rel=1e-12)
    assert areas["outer"] == pytest.approx(np.pi * 800, rel=1e-12)


def test_regions_may_share_borders_with_the_outline_and_each_other_in_part() -> None:
    """Two strips on the left edge, one along half of the other; all vertices are T-junctions."""
    areas = areas_of(
        regions=[
            {"name": "low", "thickness": 3, "outline": rectangle(0, 0, 50, 40)},
            {"name": "high", "thickness": 3, "outline": rectangle(0, 40, 90, 30)},
        ]
    )
    assert areas == pytest.approx({"low": 2000, "high": 2700, "plate": 15300})


def test_regions_may_cover_the_plate_altogether() -> None:
    areas = areas_of(
        regions=[
            {"name": "left", "thickness": 3, "outline": rectangle(0, 0, 50, 100)},
            {"name": "right", "thickness": 3, "outline": rectangle(50, 0, 150, 100)},
        ]
    )
    assert areas == pytest.approx({"left": 5000, "right": 15000})


def test_hole_may_cross_the_border_of_a_region() -> None:
    """Half of the hole lies in the region."""
    areas = areas_of(
        holes=[hole("hatch", 50, 50, 20)],
        regions=[{"name": "thick", "thickness": 3, "outline": rectangle(0, 0, 50, 100)}],
    )
    half = np.pi * 400 / 2
    assert areas == pytest.approx({"thick": 5000 - half, "plate": 15000 - half}, rel=1e-12)


def test_region_may_share_an_arc_with_the_outline() -> None:
    """The segment that a chord cuts off a disc; the chord's ends are rounded to 4 digits."""
    outline = [{"at": polar(0, 0, 100, a), "through": polar(0, 0, 100, a + 45)}
               for a in range(0, 360, 90)]  # fmt: skip
    a, b = ([round(c, 4) for c in polar(0, 0, 100, angle)] for angle in (40, 140))
    segment = [{"at": a, "through": [0, 100]}, {"at": b}]
    segment.insert(1, {"at": [0, 100], "through": polar(0, 0, 100, 115)})
    segment[0]["through"] = polar(0, 0, 100, 65)
    drawing = draw(
        drawn(
            {"outline": outline, "regions": [{"name": "cap", "thickness": 3, "outline": segment}]}
        )
    )
    angle = np.radians(100)
    assert domain_areas(drawing)["cap"] == pytest.approx(
        100**2 / 2 * (angle - np.sin(angle)), rel=1e-5
    )
    for edge in drawing.edges:  # the outline's own circle, which the rounded chord does not bend
        if isinstance(edge.curve, Arc):
            assert edge.curve.radius == pytest.approx(100, rel=1e-12)
            assert np.hypot(*edge.start) == pytest.approx(100, rel=1e-12)


def test_vertex_rounded_in_the_document_is_put_on_the_side() -> None:
    """Three digits after the point in a slope of one third: the region still shares the border."""
    drawing = draw(
        drawn(
            {
                "outline": loop((0, 0), (300, 100), (0, 200)),
                "regions": [
                    {
                        "name": "toe",
                        "thickness": 3,
                        "outline": loop((200, 66.667), (300, 100), (200, 133.333)),
                    }
                ],
            }
        )
    )
    assert domain_areas(drawing) == pytest.approx({"toe": 3333.33, "plate": 26666.67}, abs=0.02)
    assert len(drawing.edges) == 6


# --- fillets ---------------------------------------------------------------------------------


def arc_sides(geometry: Json) -> list[Arc]:
    return [e.curve for e in draw(drawn(geometry)).edges if isinstance(e.curve, Arc)]


def assert_smooth_everywhere(geometry: Json, sharp: int) -> None:
    """All but so many corners are 180 degrees: arcs join their neighbours tangentially."""
    angles = [c.degrees for c in corners(draw(drawn(geometry)).edges) if c.domain == 1]
    assert sum(abs(angle - 180) > 1e-5 for angle in angles) == sharp


@pytest.mark.parametrize("corner", [(100, 50), (100, 150), (20, 130), (190, 90)])
def test_fillet_between_straight_sides_is_tangent_to_both(corner: tuple[float, float]) -> None:
    """Convex and concave, obtuse and acute; the area is shapely's."""
    outline = loop((0, 0), (200, 0), corner, (0, 200))
    outline[2]["fillet"] = 8
    assert_smooth_everywhere({"outline": outline}, sharp=3)
    assert draw(drawn({"outline": outline})).area == pytest.approx(polygon(outline).area, rel=1e-7)


@pytest.mark.parametrize("bulge", [40.0, 12.0, -12.0, -40.0])
@pytest.mark.parametrize("radius", [1.0, 5.0])
def test_fillet_between_a_side_and_an_arc_is_tangent_to_both(bulge: float, radius: float) -> None:
    outline = rectangle(0, 0, 200, 100)
    outline[1] |= {"through": [200 + bulge, 50]}
    outline[1] |= {"fillet": radius}
    outline[2] |= {"fillet": radius}
    assert_smooth_everywhere({"outline": outline}, sharp=2)
    rounds = [arc for arc in arc_sides({"outline": outline}) if arc.radius == radius]
    assert len({tuple(arc.centre) for arc in rounds}) == 2
    for arc in rounds:
        assert np.hypot(*(arc.start - arc.centre)) == pytest.approx(radius, rel=1e-9)
        assert np.hypot(*(arc.end - arc.centre)) == pytest.approx(radius, rel=1e-9)


def test_fillet_between_two_arcs_is_tangent_to_both() -> None:
    """A lens with both tips rounded has no corner left."""
    lens = [
        {"at": [-100, 0], "through": [-50, -30], "fillet": 4},
        {"at": [0, -38], "through": [50, -30]},
        {"at": [100, 0], "through": [50, 30], "fillet": 6},
        {"at": [0, 38], "through": [-50, 30]},
    ]
    drawing = draw(drawn({"outline": lens}))
    angles = {c.at: c.degrees for c in corners(drawing.edges) if c.domain == 1}
    fillets = [e for e in drawing.edges if isinstance(e.curve, Arc) and e.curve.radius in (4, 6)]
    assert {e.curve.radius for e in fillets if isinstance(e.curve, Arc)} == {4, 6}
    for place in {place for e in fillets for place in (e.start, e.end)}:
        assert angles[place] == pytest.approx(180, abs=1e-5)


def test_fillets_may_take_a_side_whole() -> None:
    """Two rounds of half the width make a half turn; nothing is left of the side between."""
    outline = rectangle(0, 0, 200, 100)
    outline[1] |= {"fillet": 50}
    outline[2] |= {"fillet": 50}
    drawing = draw(drawn({"outline": outline}))
    assert len(drawing.edges) == 5
    assert drawing.area == pytest.approx(150 * 100 + np.pi * 2500 / 2, rel=1e-12)


@pytest.mark.parametrize("factor", [1 / 3, 25.4, 1e-3, 0.1])
def test_fillets_may_take_a_side_whole_in_any_unit(factor: float) -> None:
    """Rounding of the numbers must not leave a gap or an overlap."""
    outline = rectangle(1.1 * factor, 0.7 * factor, 20 * factor, 10 * factor)
    for vertex in outline:
        vertex["fillet"] = 10 * factor / 2
    drawing = draw(drawn({"outline": outline}))
    assert len(drawing.edges) == 6
    assert drawing.area == pytest.approx((100 + np.pi * 25) * factor**2, rel=1e-9)


# --- names, points, corners ----------------------------------------------------------------------


def test_names_go_with_their_sides() -> None:
    outline = rectangle(0, 0, 200, 100)
    outline[1] |= {"side": "right", "fillet": 10, "fillet_side": "round"}
    outline[0] |= {"side": "base"}
    geometry = {
        "outline": outline,
        "holes": [hole("pin", 60, 50, 10)],
        "regions": [{"name": "thick", "thickness": 3, "outline": rectangle(150, 40, 50, 20)}],
    }
    lengths: dict[str | None, float] = {}
    for edge in draw(drawn(geometry)).edges:
        lengths[edge.side] = lengths.get(edge.side, 0.0) + edge.curve.length
    assert lengths == pytest.approx(
        {
            "base": 190,
            "round": np.pi * 5,
            "right": 90,  # in three pieces: the region shares the middle one
            "pin": np.pi * 20,
            None: 200 + 100 + 50 + 50 + 20,  # the top, the left, and the region's inner border
        }
    )


def test_points_on_edges_are_vertices_and_others_know_their_domain() -> None:
    drawing = draw(
        drawn(
            {
                "outline": rectangle(0, 0, 200, 100),
                "regions": [{"name": "boss", "thickness": 3, **circle(60, 50, 20)}],
                "points": {
                    "edge": [50, 0],
                    "corner": [200, 100],
                    "rim": [80, 50],
                    "free": [150, 50],
                    "heart": [60, 55],
                },
            }
        )
    )
    vertices = {edge.start for edge in drawing.edges} | {edge.end for edge in drawing.edges}
    assert {n for n, place in drawing.points.items() if place in vertices} == {
        "edge", "corner", "rim",
    }  # fmt: skip
    domains = {name: drawing.regions[d - 1] for name, d in drawing.inner.items()}
    assert domains == {"free": "plate", "heart": "boss"}


def test_sharp_corners_of_the_material_are_listed_the_sharpest_first() -> None:
    """A right-angled triangle of 20 and 70 degrees; the notch's 20 degrees are no material."""
    toe = np.tan(np.radians(20)) * 300
    outline = [*loop((0, 0), (300, 0), (300, toe))]
    found = sharp_corners(draw(drawn({"outline": outline})).edges, 80)
    assert [round(c.degrees, 9) for c in found] == [20, 70]
    assert found[0].at == (0, 0)
    notched = loop((0, 0), (100, 0), (100, 50), (55, 50), (50, 20), (45, 50), (0, 50))
    assert not sharp_corners(draw(drawn({"outline": notched})).edges, 60)


def test_slot_is_what_its_name_says() -> None:
    """Two half circles and a rectangle."""
    drawing = draw(drawn({"outline": slot(0, 0, 100, 20)}))
    assert drawing.area == pytest.approx(100 * 40 + np.pi * 400, rel=1e-12)
