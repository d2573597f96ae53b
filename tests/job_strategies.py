"""Hypothesis strategies for jobs of every kind, with consistent names and no geometric sense.

Strategies are made once, not for each example: making them takes longer than drawing from them.
"""

from collections.abc import Iterable
from typing import Any

import numpy as np
from hypothesis import strategies as st

from workers import geometry as shapes
from workers import job as parts

SIDE, HOLE, REGION, POINT = "edge (north)", "pin-hole #1", "ärmel", "точка 2"
STEEL, OTHER = "S355", "bronze, cast"
CASES = ("lift", "lift + wind")
NODES = 8  # at least, in a mesh

ANY = st.floats(-1e12, 1e12)
POSITIVE = st.floats(1e-9, 1e12)
VECTOR = st.tuples(ANY, ANY)
TWO_POINTS = st.tuples(VECTOR, VECTOR).filter(lambda pair: pair[0] != pair[1])

# The rule for names, said another way: letters, marks, digits, and these signs.
NAME = st.text(
    st.characters(categories=("L", "M", "Nd"), include_characters="._-+()#,= "),
    min_size=1,
    max_size=80,
).filter(lambda name: name[0] not in ". ")
TITLE = st.text(
    st.characters(exclude_categories=("C", "Zl", "Zp")), min_size=1, max_size=200
).filter(str.strip)


def maybe(strategy: st.SearchStrategy[Any]) -> st.SearchStrategy[Any]:
    return st.none() | strategy


def one_of(names: Iterable[str]) -> st.SearchStrategy[parts.Named]:
    return st.sampled_from([parts.Named(name) for name in names])


def some(strategy: st.SearchStrategy[Any], least: int, most: int) -> st.SearchStrategy[Any]:
    return st.lists(strategy, min_size=least, max_size=most).map(tuple)


def mapping(keys: Any, values: Any, least: int = 0) -> st.SearchStrategy[dict[str, Any]]:
    return st.dictionaries(keys, values, min_size=least, max_size=3)


# --- materials and geometry --------------------------------------------------------------------


def material(name: str) -> st.SearchStrategy[parts.Material]:
    ratio = st.floats(-1, 0.5, exclude_min=True, exclude_max=True)
    return st.builds(
        parts.Material, st.just(name), POSITIVE, ratio, POSITIVE, st.floats(0, 1e5), ANY
    )


MATERIALS = st.fixed_dictionaries({name: material(name) for name in (STEEL, OTHER)})
CIRCLE = st.builds(shapes.CircleShape, VECTOR, POSITIVE)
POINTS = st.fixed_dictionaries({POINT: VECTOR})


def loop(*names: str | None) -> st.SearchStrategy[tuple[shapes.Vertex, ...]]:
    """A closed loop; its first vertex has the first name for its side."""
    name = st.sampled_from(names)
    first = st.builds(shapes.Vertex, at=VECTOR, side=st.just(names[0]), through=maybe(VECTOR))
    other = st.builds(shapes.Vertex, at=VECTOR, side=name) | st.builds(
        shapes.Vertex, at=VECTOR, fillet=POSITIVE, fillet_side=name
    )
    return st.tuples(first, some(other, 2, 4)).map(lambda pair: (pair[0], *pair[1]))


SHAPE = CIRCLE | loop(None)


def region(shape: st.SearchStrategy[Any]) -> st.SearchStrategy[tuple[shapes.Region, ...]]:
    stuff = maybe(st.just(OTHER))
    return st.builds(shapes.Region, st.just(REGION), shape, POSITIVE, stuff).map(lambda r: (r,))


OUTLINE = st.builds(
    shapes.OutlineGeometry,
    loop(SIDE, None),
    st.builds(shapes.Hole, st.just(HOLE), SHAPE).map(lambda hole: (hole,)),
    region(SHAPE),
    POINTS,
)


def patch(name: str, inside: str | None) -> st.SearchStrategy[shapes.Patch]:
    ratio, division = st.floats(1e-3, 1e3), st.integers(1, 1000)
    return st.builds(
        shapes.Patch,
        st.just(name),
        st.tuples(*[VECTOR] * 4),
        st.tuples(division, division),
        st.tuples(ratio, ratio),
        st.tuples(st.just(SIDE), *[st.sampled_from([None, SIDE])] * 3),
        st.tuples(*[maybe(VECTOR)] * 4),
        st.just(inside),
    )


PATCHES = st.builds(
    shapes.PatchGeometry,
    st.tuples(patch("one", REGION), patch("two", None)),
    region(st.none()),
    POINTS,
)


def block(element: str, width: int, inside: str | None) -> st.SearchStrategy[shapes.MeshBlock]:
    row = st.tuples(*[st.integers(0, NODES - 1)] * width)
    array = st.lists(row, min_size=1, max_size=4).map(lambda rows: np.array(rows, np.int32))
    return st.builds(shapes.MeshBlock, st.just(element), array, st.just(inside))


NODE = st.integers(0, NODES - 1)
MESH = st.builds(
    shapes.MeshGeometry,
    st.lists(VECTOR, min_size=NODES, max_size=NODES + 3).map(lambda xy: np.array(xy, np.float64)),
    st.tuples(block("Q8", 8, REGION), block("T3", 3, None)),
    st.fixed_dictionaries({SIDE: some(st.tuples(NODE, NODE) | st.tuples(NODE, NODE, NODE), 1, 4)}),
    st.fixed_dictionaries({POINT: NODE}),
    region(st.none()),
)

ELEMENT = st.sampled_from(["T3", "T6", "Q4", "Q8"])
SIZES = mapping(st.sampled_from([SIDE, HOLE, REGION, POINT]), POSITIVE)
ERROR = st.floats(1e-6, 0.999)
FREE = st.builds(parts.Meshing, ELEMENT, maybe(POSITIVE), SIZES, maybe(ERROR)) | st.builds(
    parts.Meshing, ELEMENT, target_error=ERROR, max_dofs=st.integers(100, 10**6)
)


UNTOUCHED = st.just(parts.Meshing())  # a finished mesh stays as it is


# --- supports and loads ------------------------------------------------------------------------

TOLERANCE = maybe(POSITIVE)
SMALL = st.floats(-1e3, 1e3)
SELECTOR = (
    st.builds(lambda ends, off: parts.Segment(*ends, off), TWO_POINTS, TOLERANCE)
    | st.builds(
        lambda x, y, width, off: parts.Box((x, y), (x + width, y + width), off),
        SMALL, SMALL, st.floats(1, 1e3), TOLERANCE,
    )
    | st.builds(parts.OnCircle, VECTOR, POSITIVE, TOLERANCE)
)  # fmt: skip
NUMBERS = st.builds(parts.Nodes, some(NODE, 1, 5))

STIFFNESS = st.floats(0, 1e9)
# [normal, along with displacement, spring]; a point has neither normal nor tangent.
ACROSS = st.tuples(
    maybe(ANY),
    maybe(st.tuples(VECTOR.filter(any), maybe(ANY))),
    maybe(st.builds(parts.Spring, POSITIVE, STIFFNESS, STIFFNESS, STIFFNESS)),
)
AT_POINT = st.tuples(st.none(), st.none(), maybe(st.builds(parts.Spring, POSITIVE, STIFFNESS)))
CASE = maybe(st.sampled_from(CASES))


def support(number: int, on: Any, rest: Any) -> st.SearchStrategy[parts.Support]:
    def build(on: Any, ux: float, uy: float | None, rest: Any, case: str | None) -> parts.Support:
        normal, along, spring = rest
        direction, displacement = along or (None, None)
        label = f"support no. {number}"
        return parts.Support(label, on, ux, uy, normal, direction, displacement, spring, case)

    return st.builds(build, on, POSITIVE, maybe(ANY), rest, CASE)


def supports(sides: list[str], selector: Any) -> st.SearchStrategy[tuple[parts.Support, ...]]:
    return st.tuples(
        support(1, one_of(sides) | selector, ACROSS), support(2, one_of([POINT]), AT_POINT)
    )


def load(sides: list[str], selector: Any) -> st.SearchStrategy[parts.Load]:
    side = one_of(sides) | selector
    area = maybe(one_of([REGION]))
    return st.one_of(
        st.builds(parts.PointForce, on=one_of([POINT]), force=VECTOR),
        st.builds(parts.TotalForce, on=side, force=VECTOR),
        st.builds(parts.TotalMoment, on=side, moment=ANY),
        st.builds(parts.Traction, on=side, start=VECTOR, end=VECTOR),
        st.builds(parts.Pressure, on=side, start=ANY, end=ANY),
        st.builds(parts.Shear, on=side, start=ANY, end=ANY),
        st.builds(parts.LineLoad, on=side, start=VECTOR, end=VECTOR),
        st.builds(parts.Bearing, on=side, force=VECTOR),
        st.builds(parts.Acceleration, on=area, acceleration=VECTOR),
        st.builds(parts.BodyForce, on=area, force=VECTOR),
        st.builds(parts.Spin, on=area, about=VECTOR, speed=ANY),
        st.builds(parts.TemperatureChange, on=area, change=ANY),
    )


def cases(loads: st.SearchStrategy[parts.Load]) -> st.SearchStrategy[tuple[parts.LoadCase, ...]]:
    return st.tuples(
        *(st.builds(parts.LoadCase, st.just(name), some(loads, 1, 3)) for name in CASES)
    )


COMBINATION = st.builds(
    parts.Combination,
    NAME.filter(lambda name: name not in CASES),
    mapping(st.sampled_from(CASES), ANY, least=1),
)

# --- the rest ----------------------------------------------------------------------------------

LINE = st.builds(lambda ends, n: parts.Line(*ends, n), TWO_POINTS, st.integers(2, 2001))
CUT = TWO_POINTS.map(lambda ends: parts.Cut(*ends))
HOT_SPOT = st.builds(parts.HotSpot, VECTOR, VECTOR.filter(any), POSITIVE)


def requests(convergence: st.SearchStrategy[bool]) -> st.SearchStrategy[parts.Requests]:
    return st.builds(
        parts.Requests,
        probes=mapping(NAME, VECTOR),
        lines=mapping(NAME, LINE),
        cuts=mapping(NAME, CUT),
        hot_spots=mapping(NAME, HOT_SPOT),
        convergence=convergence,
    )


UNITS = st.builds(
    parts.Units,
    st.sampled_from(["mm", "cm", "m", "in", "ft"]),
    st.sampled_from(["N", "kN", "MN", "lbf", "kip"]),
)


def _jobs(geometry: Any, sides: list[str], selector: Any, meshing: Any) -> Any:
    return st.builds(
        parts.Job,
        title=TITLE,
        units=UNITS,
        materials=MATERIALS,
        geometry=geometry,
        plate=st.builds(parts.Plate, st.just(STEEL), POSITIVE),
        supports=supports(sides, selector),
        load_cases=cases(load(sides, selector)),
        combinations=st.lists(COMBINATION, max_size=2, unique_by=lambda c: c.name).map(tuple),
        meshing=meshing,
        requests=requests(st.booleans() if meshing is not UNTOUCHED else st.just(False)),
        limits=st.builds(parts.Limits, maybe(POSITIVE), maybe(POSITIVE)),
        label=maybe(TITLE),
    )


# Any job that the document format can say; its pointers are left empty.
JOBS: st.SearchStrategy[parts.Job] = st.one_of(
    _jobs(OUTLINE, [SIDE, HOLE], SELECTOR, FREE),
    _jobs(PATCHES, [SIDE], SELECTOR, st.builds(parts.Meshing, ELEMENT, target_error=maybe(ERROR))),
    _jobs(MESH, [SIDE], SELECTOR | NUMBERS, UNTOUCHED),
)
