"""Faulty drawings: each is refused with its own words, where it is wrong, and what would be right.

The expected places are worked out by hand from the coordinates in the table. A plate of 200 x 100
has a diagonal of 223.6, so that sides must be at least 0.00224 long and apart.
"""

import re
from typing import Any

import pytest

from tests.gallery import circle, disc, drawn, hole, loop, polar, rectangle, slot
from workers.analysis.meshing.outline import draw
from workers.errors import DocumentError

Json = dict[str, Any]
PLATE = rectangle(0, 0, 200, 100)


def plate(**parts: Any) -> Json:
    return {"outline": PLATE, **parts}


def region(name: str, shape: Json | list[Json]) -> Json:
    border = {"outline": shape} if isinstance(shape, list) else shape
    return {"name": name, "thickness": 20, **border}


def outline(*places: tuple[float, float]) -> Json:
    return {"outline": loop(*places)}


def changed(geometry: list[Json], number: int, **keys: Any) -> list[Json]:
    return [{**v, **keys} if i == number else v for i, v in enumerate(geometry)]


# name: (geometry, pointer of the fault, what its message must say)
FAULTS: dict[str, tuple[Json, str, str]] = {
    # --- one loop: its sides -----------------------------------------------------------------
    "two vertices in one place": (
        outline((0, 0), (200, 0), (200, 0), (200, 100), (0, 100)),
        "/geometry/outline/1",
        r"from \(200, 0\) to \(200, 0\) is too short.*at least 0.00224 apart",
    ),
    "first vertex repeated at the end": (
        outline((0, 0), (200, 0), (200, 100), (0, 100), (0, 0)),
        "/geometry/outline/4",
        r"\(0, 0\) is too short.*closes by itself",
    ),
    "side shorter than the tolerance": (
        outline((0, 0), (200, 0), (200, 0.001), (200, 100), (0, 100)),
        "/geometry/outline/1",
        r"from \(200, 0\) to \(200, 0.001\) is too short",
    ),
    "no area": (
        outline((0, 0), (100, 0), (200, 0)),
        "/geometry/outline",
        r"the outline encloses no area: its sides from \(0, 0\)",
    ),
    "all vertices in one place": (
        outline((5, 7), (5, 7), (5, 7)),
        "/geometry/outline",
        r"all vertices are at \(5, 7\)",
    ),
    "far from the origin": (
        {"outline": rectangle(1e8, 0, 200, 100)},
        "/geometry/outline",
        r"1e\+08 from the origin, near \(1e\+08, 0\).*move the origin nearer",
    ),
    "arc through a point in line": (
        {"outline": changed(PLATE, 0, through=[100, 0])},
        "/geometry/outline/0/through",
        r"no arc goes from \(0, 0\) through \(100, 0\) to \(200, 0\).*in line",
    ),
    "arc through its own start": (
        {"outline": changed(PLATE, 0, through=[0, 0])},
        "/geometry/outline/0/through",
        r"through \(0, 0\).*coincide",
    ),
    "outline like a bow-tie": (
        outline((0, 0), (200, 100), (200, 0), (0, 100)),
        "/geometry/outline/2",
        r"the outline crosses, touches or nearly touches itself near \(100, 50\)",
    ),
    "outline touches itself at a vertex": (
        outline((0, 0), (200, 0), (200, 100), (100, 50), (0, 100), (0, 60), (100, 50), (0, 40)),
        "/geometry/outline/6",
        r"touches itself near \(100, 50\)",
    ),
    "outline runs back along itself": (
        outline((0, 0), (200, 0), (200, 100), (200, 40), (300, 40), (200, 39), (0, 100)),
        "/geometry/outline/",
        r"the outline crosses, touches or nearly touches itself near \(200, \d",
    ),
    "vertex touches another side": (
        outline((0, 0), (200, 0), (200, 100), (110, 100), (100, 0), (90, 100), (0, 100)),
        "/geometry/outline/4",
        r"touches itself near \(100, 0\)",
    ),
    "vertex nearly touches another side": (
        outline((0, 0), (200, 0), (200, 100), (110, 100), (100, 0.0015), (90, 100), (0, 100)),
        "/geometry/outline/",
        r"comes within 0.0015 of itself near \(100, 0.*stay 0.00224 apart",
    ),
    "arc bulges through the opposite side": (
        {"outline": changed(PLATE, 0, through=[100, 130])},
        "/geometry/outline/",
        r"the outline crosses, touches or nearly touches itself near \(0, 53.0769\)",
    ),
    "sliver corner": (
        outline((0, 0), (200, 0), (200, 2)),
        "/geometry/outline/",
        r"corner of 0.57 degrees at \(0, 0\).*sharper than 1 degree",
    ),
    "crack drawn as a notch": (
        outline((0, 0), (200, 0), (200, 100), (100.3, 100), (100, 20), (99.7, 100), (0, 100)),
        "/geometry/outline/",
        r"notch of 0.43 degrees at \(100, 20\).*at least 1 degree",
    ),
    "arc tangent to a side": (
        {"outline": [*loop((0, 0), (200, 0), (200, 100), (50, 100)),
                     {"at": [50, 50], "through": polar(0, 50, 50, -45)}]},
        "/geometry/outline/",
        r"corner of 0.00 degrees at \(0, 0\)",
    ),
    # --- fillets ------------------------------------------------------------------------------
    "fillet larger than its sides": (
        {"outline": changed(PLATE, 1, fillet=120)},
        "/geometry/outline/1/fillet",
        r"radius 120 does not fit at \(200, 0\).*at most 100 does",
    ),
    "fillets that overlap": (
        {"outline": changed(changed(PLATE, 1, fillet=60), 2, fillet=50)},
        "/geometry/outline/1/fillet",
        r"ends of the side from \(200, 0\) to \(200, 100\) overlap by 10",
    ),
    "fillets that leave a crumb of a side": (
        {"outline": changed(changed(PLATE, 1, fillet=60), 2, fillet=39.999)},
        "/geometry/outline/1/fillet",
        r"leave only 0.001 of the side from \(200, 0\).*at least 0.00224",
    ),
    "fillet without a corner": (
        {"outline": changed(loop((0, 0), (99, 0), (200, 0), (200, 100)), 1, fillet=5)},
        "/geometry/outline/1/fillet",
        r"there is no corner at \(99, 0\)",
    ),
    "fillet where sides run back": (
        {"outline": changed(loop((0, 0), (200, 0), (100, 0), (100, 80)), 1, fillet=5)},
        "/geometry/outline/1/fillet",
        r"the sides run back on each other at \(200, 0\)",
    ),
    "fillet larger than the arc that it meets": (
        {"outline": changed(slot(0, 0, 200, 30), 0, fillet=40)},
        "/geometry/outline/0/fillet",
        r"no corner at \(-100, -30\)",
    ),
    "fillet between a side and an arc too tight": (
        {"outline": changed(changed(PLATE, 2, through=[100, 60]), 2, fillet=150)},
        "/geometry/outline/2/fillet",
        r"radius 150 does not fit at \(200, 100\)",
    ),
    # --- holes --------------------------------------------------------------------------------
    "hole outside": (
        plate(holes=[hole("pin", 300, 50, 10)]),
        "/geometry/holes/0",
        r"hole 'pin' lies outside the plate's outline near \(",
    ),
    "hole across the edge": (
        plate(holes=[hole("pin", 200, 50, 10)]),
        "/geometry/holes/0",
        r"hole 'pin' crosses, touches or nearly touches the outline near \(200, (60|40)\)",
    ),
    "hole around the plate": (
        plate(holes=[hole("sea", 100, 50, 400)]),
        "/geometry/holes/0",
        r"hole 'sea' reaches beyond the plate's outline near",
    ),
    "hole tangent to the edge": (
        plate(holes=[hole("pin", 100, 10, 10)]),
        "/geometry/holes/0",
        r"hole 'pin' crosses, touches or nearly touches the outline near \(100, 0\)",
    ),
    "hole a hair from the edge": (
        plate(holes=[hole("pin", 100, 10.002, 10)]),
        "/geometry/holes/0",
        r"leaves no material to the outline near \(100, 0.*\(gap 0.002\).*at least 0.00224 apart",
    ),
    "hole with a side along the edge": (
        plate(holes=[{"name": "mouth", "outline": rectangle(80, 0, 40, 20)}]),
        "/geometry/holes/0",
        r"hole 'mouth' crosses, touches or nearly touches the outline near \((80|120), 0\)",
    ),
    "hole that only touches with a vertex": (
        plate(holes=[{"name": "tip", "outline": loop((100, 0), (120, 30), (80, 30))}]),
        "/geometry/holes/0",
        r"hole 'tip' crosses, touches or nearly touches the outline near \(100, 0\)",
    ),
    "holes that overlap": (
        plate(holes=[hole("one", 60, 50, 20), hole("two", 90, 50, 20)]),
        "/geometry/holes/1",
        r"hole 'two' crosses, touches or nearly touches hole 'one' near \(75, (63|36)",
    ),
    "holes that touch": (
        plate(holes=[hole("one", 60, 50, 20), hole("two", 100, 50, 20)]),
        "/geometry/holes/1",
        r"hole 'two' crosses, touches or nearly touches hole 'one' near \(80, 50\)",
    ),
    "holes a hair apart": (
        plate(holes=[hole("one", 60, 50, 20), hole("two", 100.002, 50, 20)]),
        "/geometry/holes/1",
        r"hole 'two' leaves no material to hole 'one' near \(80.*gap 0.002",
    ),
    "hole in a hole": (
        plate(holes=[hole("small", 60, 50, 5), hole("large", 60, 50, 20)]),
        "/geometry/holes/0",
        r"hole 'small' lies in hole 'large' near \((65|60|55|56|64|63)",
    ),
    "hole twice": (
        plate(holes=[hole("one", 60, 50, 20), hole("again", 60, 50, 20)]),
        "/geometry/holes/1",
        r"hole 'again' crosses, touches or nearly touches hole 'one' near \(\d0, \d0\)",
    ),
    "hole too small to mesh": (
        plate(holes=[hole("pinprick", 60, 50, 0.001)]),
        "/geometry/holes/0/circle/radius",
        r"radius 0.001 at \(60, 50\) is too small.*at least 0.00224",
    ),
    "hole that crosses itself": (
        plate(holes=[{"name": "bow", "outline": loop((50, 30), (90, 70), (90, 30), (50, 70))}]),
        "/geometry/holes/0/outline/2",
        r"hole 'bow' crosses, touches or nearly touches itself near \(70, 50\)",
    ),
    "hole without area": (
        plate(holes=[{"name": "slit", "outline": loop((50, 50), (90, 50), (70, 50))}]),
        "/geometry/holes/0",
        r"hole 'slit' encloses no area.*\(50, 50\)",
    ),
    # --- regions ------------------------------------------------------------------------------
    "region outside": (
        plate(regions=[region("pad", circle(300, 50, 10))]),
        "/geometry/regions/0",
        r"region 'pad' lies outside the plate's outline near",
    ),
    "region across the edge": (
        plate(regions=[region("pad", circle(200, 50, 10))]),
        "/geometry/regions/0",
        r"region 'pad' reaches beyond the plate's outline near \(207.071, (57|42).*keep it inside",
    ),
    "region across the edge at its vertices": (
        plate(regions=[region("pad", loop((200, 20), (230, 50), (200, 80), (150, 50)))]),
        "/geometry/regions/0",
        r"region 'pad' reaches beyond the plate's outline near \(215, (35|65)\)",
    ),
    "region beside the plate that shares its edge": (
        plate(regions=[region("pad", rectangle(200, 20, 30, 60))]),
        "/geometry/regions/0",
        r"region 'pad' lies outside the plate's outline near \(",
    ),
    "region tangent to the edge": (
        plate(regions=[region("pad", circle(100, 20, 20))]),
        "/geometry/",
        r"corner of 0.00 degrees at \(100, 0\)",
    ),
    "region a hair from the edge": (
        plate(regions=[region("pad", rectangle(50, 0.0015, 40, 30))]),
        "/geometry/regions/0",
        r"border of region 'pad' comes within 0.0015 of the outline near \((50|90), 0.*exactly",
    ),
    "regions that cross": (
        plate(regions=[region("one", circle(60, 50, 20)), region("two", circle(90, 50, 20))]),
        "/geometry/regions/1",
        r"region 'two' crosses the border of region 'one' near \(75, (63|36)",
    ),
    "regions that overlap between shared vertices": (
        plate(regions=[region("one", rectangle(20, 20, 60, 60)),
                       region("two", loop((80, 20), (120, 50), (80, 80), (40, 50)))]),
        "/geometry/regions/1",
        r"region 'two' overlaps region 'one' partly near \(",
    ),
    "region twice": (
        plate(regions=[region("one", circle(60, 50, 20)), region("again", circle(60, 50, 20))]),
        "/geometry/regions/",
        r"nothing is left of region '(one|again)'.*near \(",
    ),
    "region covered by two others": (
        plate(regions=[region("whole", rectangle(40, 20, 80, 60)),
                       region("left half", rectangle(40, 20, 40, 60)),
                       region("right half", rectangle(80, 20, 40, 60))]),
        "/geometry/regions/0",
        r"nothing is left of region 'whole'",
    ),
    "region in a hole": (
        plate(holes=[hole("pin", 60, 50, 30)], regions=[region("core", circle(60, 50, 20))]),
        "/geometry/regions/0",
        r"nothing is left of region 'core': .*holes cover it altogether near \(",
    ),
    "region thinner than a sliver beside a hole": (
        plate(holes=[hole("pin", 60, 50, 30)], regions=[region("collar", circle(60, 50, 30.0015))]),
        "/geometry/regions/0",
        r"border of region 'collar' comes within 0.0015 of hole 'pin'",
    ),
    "region that crosses itself": (
        plate(regions=[region("bow", loop((50, 30), (90, 70), (90, 30), (50, 70)))]),
        "/geometry/regions/0/outline/2",
        r"region 'bow' crosses, touches or nearly touches itself near \(70, 50\)",
    ),
    # --- points -------------------------------------------------------------------------------
    "point outside": (
        plate(points={"gauge": [250, 50]}),
        "/geometry/points/gauge",
        r"point 'gauge' at \(250, 50\) lies outside the plate",
    ),
    "point in a hole": (
        plate(holes=[hole("pin", 60, 50, 20)], points={"centre": [60, 50]}),
        "/geometry/points/centre",
        r"point 'centre' at \(60, 50\) lies outside the plate or in a hole",
    ),
    "point nearly on the edge": (
        plate(points={"gauge": [100, 0.002]}),
        "/geometry/points/gauge",
        r"point 'gauge' at \(100, 0.002\) is nearly, but not quite, on a side.*0.00224 away",
    ),
    "points nearly in one place": (
        plate(points={"one": [100, 50], "two": [100, 50.002]}),
        "/geometry/points/two",
        r"point 'two' at \(100, 50.002\) is nearly, but not quite, on point 'one'",
    ),
}  # fmt: skip


@pytest.mark.parametrize("name", FAULTS)
def test_faulty_drawing_is_told_with_pointer_and_place(name: str) -> None:
    geometry, pointer, words = FAULTS[name]
    with pytest.raises(DocumentError) as caught:
        draw(drawn(geometry))
    first = caught.value.faults[0]
    assert first.pointer.startswith(pointer)
    assert re.search(words, first.message), first.message
    assert re.search(r"\(-?[\d.e+]+, -?[\d.e+]+\)", first.message), "no place in the message"


def test_there_are_enough_different_faults() -> None:
    """At least 45 that are told in different words."""
    messages = set()
    for geometry, _, _ in FAULTS.values():
        with pytest.raises(DocumentError) as caught:
            draw(drawn(geometry))
        messages.add(caught.value.faults[0].message)
    assert len(messages) >= 45


def test_all_faults_are_told_at_once() -> None:
    """Two bad fillets, two holes that cross and a region with a bow-tie: four faults."""
    geometry = plate(
        holes=[hole("one", 60, 50, 20), hole("two", 90, 50, 20)],
        regions=[region("bow", loop((150, 30), (190, 70), (190, 30), (150, 70)))],
    )
    geometry["outline"] = changed(changed(PLATE, 0, fillet=300), 2, fillet=301)
    with pytest.raises(DocumentError) as caught:
        draw(drawn(geometry))
    assert [fault.pointer for fault in caught.value.faults] == [
        "/geometry/outline/0/fillet",
        "/geometry/outline/2/fillet",
        "/geometry/holes/1/circle",
        "/geometry/regions/0/outline/2",
    ]


@pytest.mark.parametrize(
    "parts",
    [
        {"holes": [hole(f"pin {i}", 60, 50, 20) for i in range(2000)]},
        {"holes": [hole(f"pin {i}", 60, 50, 20 + i * 1e-7) for i in range(2000)]},
        {"holes": [hole(f"pin {i}", 60 + i / 100, 50, 20) for i in range(2000)]},
        {"regions": [region(f"pad {i}", circle(60 + i / 100, 50, 20)) for i in range(2000)]},
        {"points": {f"gauge {i}": [60 + i * 1e-7, 50] for i in range(5000)}},
    ],
    ids=["same holes", "nearly same holes", "crossing holes", "crossing regions", "points"],
)
def test_thousands_of_things_in_one_place_are_refused_in_bounded_work(parts: Json) -> None:
    """Millions of pairs, of which a few are told."""
    with pytest.raises(DocumentError) as caught:
        draw(drawn(plate(**parts)))
    assert 1 <= len(caught.value.faults) <= 30


@pytest.mark.parametrize("size", [1e-3, 1.0, 25.4, 1e6])
def test_what_is_too_close_scales_with_the_plate(size: float) -> None:
    """A gap of half the tolerance is refused, one of twice is not, in any unit of length."""
    diagonal = size * 5**0.5
    for gap, fits in ((0.7e-5, False), (2e-5, True)):
        pin = hole("pin", size, size / 4 + gap * diagonal, size / 4)
        geometry = {"outline": rectangle(0, 0, 2 * size, size), "holes": [pin]}
        if fits:
            draw(drawn(geometry))
        else:
            with pytest.raises(DocumentError, match="leaves no material"):
                draw(drawn(geometry))


def test_clockwise_loops_are_turned() -> None:
    """The order in which a loop is drawn says nothing about which side is material."""
    holes = [{"name": "slot", "outline": slot(100, 50, 40, 10)}]
    turned = [{"name": "slot", "outline": _backwards(slot(100, 50, 40, 10))}]
    one = draw(drawn(plate(holes=holes)))
    other = draw(drawn({"outline": _backwards(PLATE), "holes": turned}))
    assert one.area == pytest.approx(other.area, rel=1e-12)
    assert one.area < 200 * 100


def _backwards(vertices: list[Json]) -> list[Json]:
    """The same loop the other way round; what belongs to a side moves to its other end."""
    turned = []
    for i in reversed(range(len(vertices))):
        before = vertices[i - 1]
        side = {key: before[key] for key in ("side", "through") if key in before}
        turned.append({"at": vertices[i]["at"], **side})
    return turned


def test_disc_from_three_arcs_is_a_disc() -> None:
    """Area of a circle: pi r^2."""
    drawing = draw(drawn({"outline": disc(3, 4, 100)}))
    assert drawing.area == pytest.approx(3.141592653589793 * 1e4, rel=1e-12)
    assert polar(3, 4, 100, 0) == list(drawing.edges[0].start)
