"""One thing wrong at a time: the fault stands in the right place, says what helps, and is alone."""

from typing import Any, NamedTuple

import pytest

from tests.good_documents import KINDS, good
from workers.document.read import load
from workers.errors import DocumentError

DROP = object()


class Bad(NamedTuple):
    """A good document, what is changed in it, where the fault must be, and words it must have."""

    name: str
    kind: str
    at: str
    value: Any
    pointer: str
    words: str  # separated by |


def change(document: Any, pointer: str, value: Any) -> None:
    """Put a value at a pointer, or take what is there away; "-" is the end of a list."""
    *path, last = pointer.split("/")[1:]
    for token in path:
        document = document[int(token) if isinstance(document, list) else token]
    if value is DROP:
        del document[int(last) if isinstance(document, list) else last]
    elif last == "-":
        document.append(value)
    else:
        document[int(last) if isinstance(document, list) else last] = value


STEEL, VERTEX, PIN = "/materials/steel", "/geometry/outline/1", "/geometry/holes/0"
LIFT, WIND, SUN, TURNING = (f"/load_cases/{c}" for c in ("lift", "wind", "sun", "turning"))
PATCH, BLOCK = "/geometry/patches/0", "/geometry/mesh/blocks/0"

SECTIONS = [
    Bad("no title", "outline", "/title", DROP, "/title", "required"),
    Bad("empty title", "outline", "/title", "  ", "/title", "empty"),
    Bad("long title", "outline", "/title", "x" * 201, "/title", "200|201"),
    Bad("title in two lines", "outline", "/title", "a\nb", "/title", "one line"),
    Bad("title a number", "outline", "/title", 7, "/title", "text|7"),
    Bad("label null", "outline", "/label", None, "/label", "null|leave it out"),
    Bad("unknown section", "outline", "/supprots", [], "/supprots", "unknown key|supports"),
    Bad("no units", "mesh", "/units", DROP, "/units", "required"),
    Bad("unknown length unit", "mesh", "/units/length", "furlong", "/units/length", "mm, cm, m"),
    Bad("unknown force unit", "mesh", "/units/force", "kg", "/units/force", "N, kN|kg"),
    Bad("length unit a list", "mesh", "/units/length", [], "/units/length", "must be one of"),
    Bad("no supports", "mesh", "/supports", [], "/supports", "1 to|0"),
    Bad("supports an object", "mesh", "/supports", {}, "/supports", "list"),
    Bad("no load cases", "mesh", "/load_cases", {}, "/load_cases", "1 to|0"),
    Bad("load cases a list", "mesh", "/load_cases", [], "/load_cases", "object"),
    Bad("plate text", "mesh", "/plate", "steel", "/plate", "object|steel"),
]

MATERIALS = [
    Bad("no modulus", "mesh", f"{STEEL}/youngs_modulus", DROP,
        f"{STEEL}/youngs_modulus", "required"),
    Bad("modulus zero", "mesh", f"{STEEL}/youngs_modulus", 0, f"{STEEL}/youngs_modulus", "above 0"),
    Bad("modulus negative with unit", "mesh", f"{STEEL}/youngs_modulus", "-210 GPa",
        f"{STEEL}/youngs_modulus", "above 0|-210 GPa"),
    Bad("modulus a length", "mesh", f"{STEEL}/youngs_modulus", "210 mm", f"{STEEL}/youngs_modulus",
        "a length|force per area|210 GPa"),
    Bad("modulus without unit", "mesh", f"{STEEL}/youngs_modulus", "210000",
        f"{STEEL}/youngs_modulus", "no unit|quotation marks"),
    Bad("modulus in unknown unit", "mesh", f"{STEEL}/youngs_modulus", "210 Gpa",
        f"{STEEL}/youngs_modulus", "unknown unit|Gpa|GPa"),
    Bad("modulus with a comma", "mesh", f"{STEEL}/youngs_modulus", "2,1 GPa",
        f"{STEEL}/youngs_modulus", "unit that cannot be read"),
    Bad("modulus in words", "mesh", f"{STEEL}/youngs_modulus", "stiff", f"{STEEL}/youngs_modulus",
        "must be a number or|210 GPa"),
    Bad("modulus true", "mesh", f"{STEEL}/youngs_modulus", True, f"{STEEL}/youngs_modulus",
        "number|true"),
    Bad("modulus too large for a number", "mesh", f"{STEEL}/youngs_modulus", "1e308 GPa",
        f"{STEEL}/youngs_modulus", "too large"),
    Bad("Poisson's ratio a half", "mesh", f"{STEEL}/poissons_ratio", 0.5, f"{STEEL}/poissons_ratio",
        "below 0.5"),
    Bad("Poisson's ratio minus one", "mesh", f"{STEEL}/poissons_ratio", -1,
        f"{STEEL}/poissons_ratio", "above -1"),
    Bad("Poisson's ratio text", "mesh", f"{STEEL}/poissons_ratio", "0.3", f"{STEEL}/poissons_ratio",
        "number|0.3"),
    Bad("density negative", "outline", f"{STEEL}/density", -1, f"{STEEL}/density", "at least 0"),
    Bad("density a mass", "outline", f"{STEEL}/density", "7850 kg", f"{STEEL}/density",
        "a mass|a density"),
    Bad("yield strength zero", "outline", f"{STEEL}/yield_strength", 0, f"{STEEL}/yield_strength",
        "above 0"),
    Bad("unknown property", "mesh", f"{STEEL}/shear_modulus", 8e4, f"{STEEL}/shear_modulus",
        "unknown key|youngs_modulus"),
    Bad("material name with a slash", "mesh", "/materials/a~1b", {}, "/materials/a~01b",
        "not a name"),
    Bad("material a number", "mesh", "/materials/lead", 3, "/materials/lead", "object"),
    Bad("plate of unknown material", "mesh", "/plate/material", "stel", "/plate/material",
        "no material|stel|did you mean|steel"),
    Bad("thickness zero", "mesh", "/plate/thickness", 0, "/plate/thickness", "above 0"),
    Bad("thickness null", "mesh", "/plate/thickness", None, "/plate/thickness", "null"),
    Bad("density missing for self weight", "outline", f"{STEEL}/density", DROP, f"{STEEL}/density",
        "required|acceleration|/load_cases/self weight/0"),
    Bad("expansion missing for heating", "outline", f"{STEEL}/thermal_expansion", DROP,
        f"{STEEL}/thermal_expansion", "required|temperature_change"),
    Bad("yield strength missing for the limit", "outline", f"{STEEL}/yield_strength", DROP,
        f"{STEEL}/yield_strength", "required|factor_on_yield"),
]  # fmt: skip

OUTLINES = [
    Bad("no geometry", "mesh", "/geometry", {"regions": []}, "/geometry",
        "exactly one|outline, patches, mesh|none"),
    Bad("two kinds of geometry", "mesh", "/geometry/outline",
        [{"at": [0, 0]}, {"at": [1, 0]}, {"at": [0, 1]}], "/geometry", "outline and mesh"),
    Bad("two vertices", "outline", "/geometry/holes/1/outline/2", DROP, "/geometry/holes/1/outline",
        "3 to|2"),
    Bad("vertex without place", "outline", f"{VERTEX}/at", DROP, f"{VERTEX}/at", "required"),
    Bad("vertex in one dimension", "outline", f"{VERTEX}/at", [1], f"{VERTEX}/at", "2 entries|1"),
    Bad("vertex in force", "outline", f"{VERTEX}/at/1", "3 kN", f"{VERTEX}/at/1",
        "a force|a length"),
    Bad("vertex a list", "outline", "/geometry/holes/1/outline/1", [30, 20],
        "/geometry/holes/1/outline/1", "object"),
    Bad("fillet negative", "outline", f"{VERTEX}/fillet", -8, f"{VERTEX}/fillet", "above 0"),
    Bad("name of no fillet", "outline", f"{VERTEX}/fillet", DROP, f"{VERTEX}/fillet_side",
        "needs fillet"),
    Bad("hole without shape", "outline", f"{PIN}/circle", DROP, PIN, "exactly one|circle, outline"),
    Bad("hole of two shapes", "outline", "/geometry/holes/1/circle",
        {"centre": [25, 25], "radius": 2}, "/geometry/holes/1", "circle and outline"),
    Bad("hole of radius zero", "outline", f"{PIN}/circle/radius", 0, f"{PIN}/circle/radius",
        "above 0"),
    Bad("hole without name", "outline", "/geometry/holes/-",
        {"circle": {"centre": [8, 80], "radius": 1}}, "/geometry/holes/2/name", "required"),
    Bad("two holes of one name", "outline", "/geometry/holes/-",
        {"name": "pin", "circle": {"centre": [8, 80], "radius": 1}}, "/geometry/holes/2/name",
        "pin|already|hole"),
    Bad("region named like a side", "outline", "/geometry/regions/-",
        {"name": "base", "circle": {"centre": [8, 80], "radius": 1}, "thickness": 2},
        "/geometry/regions/2/name", "base|already|side"),
    Bad("region named plate", "outline", "/geometry/regions/-",
        {"name": "plate", "circle": {"centre": [8, 80], "radius": 1}, "thickness": 2},
        "/geometry/regions/2/name", "plate|another name"),
    Bad("region without shape", "outline", "/geometry/regions/0/circle", DROP,
        "/geometry/regions/0", "exactly one"),
    Bad("region of unknown material", "outline", "/geometry/regions/1/material", "brass",
        "/geometry/regions/1/material", "no material|brass|bronze"),
    Bad("point named like a hole", "outline", "/geometry/points/pin", [0, 0],
        "/geometry/points/pin", "already|hole"),
    Bad("point name starts with a full stop", "outline", "/geometry/points/.tip", [0, 0],
        "/geometry/points/.tip", "not a name|full stop"),
    Bad("point name starts with a space", "outline", "/geometry/points/ tip", [0, 0],
        "/geometry/points/ tip", "not a name|space"),
    Bad("point name too long", "outline", f"/geometry/points/{'x' * 81}", [0, 0],
        f"/geometry/points/{'x' * 81}", "not a name|80"),
]  # fmt: skip

PATCHES_AND_MESHES = [
    Bad("three corners", "patches", f"{PATCH}/corners/3", DROP, f"{PATCH}/corners", "4 entries|3"),
    Bad("no divisions", "patches", f"{PATCH}/divisions", DROP, f"{PATCH}/divisions", "required"),
    Bad("division zero", "patches", f"{PATCH}/divisions/0", 0, f"{PATCH}/divisions/0", "1 to"),
    Bad("division a fraction", "patches", f"{PATCH}/divisions/1", 4.5, f"{PATCH}/divisions/1",
        "whole"),
    Bad("grading zero", "patches", f"{PATCH}/grading", [0, 1], f"{PATCH}/grading/0", "at least"),
    Bad("five side names", "patches", f"{PATCH}/sides/-", None, f"{PATCH}/sides", "4 entries|5"),
    Bad("side name a number", "patches", f"{PATCH}/sides/1", 1, f"{PATCH}/sides/1", "name"),
    Bad("arc through one number", "patches", f"{PATCH}/through/0", [5], f"{PATCH}/through/0",
        "2 entries"),
    Bad("two patches of one name", "patches", "/geometry/patches/1/name", "web",
        "/geometry/patches/1/name", "another patch"),
    Bad("patch of unknown region", "patches", f"{PATCH}/region", "tick", f"{PATCH}/region",
        "no region|thick"),
    Bad("region of no patch", "patches", "/geometry/regions/-", {"name": "thin", "thickness": 1},
        "/geometry/regions/1/name", "no patch"),
    Bad("region with a shape beside patches", "patches", "/geometry/regions/0/circle",
        {"centre": [0, 0], "radius": 1}, "/geometry/regions/0/circle", "patch"),
    Bad("hole beside patches", "patches", "/geometry/holes",
        [{"name": "h", "circle": {"centre": [1, 1], "radius": 1}}], "/geometry/holes", "outline"),
    Bad("size beside patches", "patches", "/meshing/size", 2, "/meshing/size",
        "no effect|divisions"),
    Bad("no nodes", "mesh", "/geometry/mesh/nodes", DROP, "/geometry/mesh/nodes", "required"),
    Bad("empty list of nodes", "mesh", "/geometry/mesh/nodes", [], "/geometry/mesh/nodes",
        "1 to|0"),
    Bad("node in three dimensions", "mesh", "/geometry/mesh/nodes/3", [0, 1, 0],
        "/geometry/mesh/nodes/3", "2 numbers|3"),
    Bad("node with a unit", "mesh", "/geometry/mesh/nodes/3/1", "1 m", "/geometry/mesh/nodes/3/1",
        "plain number|1 m"),
    Bad("node true", "mesh", "/geometry/mesh/nodes/3/0", False, "/geometry/mesh/nodes/3/0",
        "plain number|false"),
    Bad("node null", "mesh", "/geometry/mesh/nodes/3", None, "/geometry/mesh/nodes/3", "list|null"),
    Bad("node at infinity", "mesh", "/geometry/mesh/nodes/3/0", 10**400,
        "/geometry/mesh/nodes/3/0", "finite"),
    Bad("unknown element type", "mesh", f"{BLOCK}/element", "Q5", f"{BLOCK}/element", "Q5|Q4|T6"),
    Bad("element type a number", "mesh", f"{BLOCK}/element", 4, f"{BLOCK}/element", "element type"),
    Bad("three nodes for a Q4", "mesh", f"{BLOCK}/connectivity/1", [1, 2, 5],
        f"{BLOCK}/connectivity/1", "4 numbers|3"),
    Bad("node number a fraction", "mesh", f"{BLOCK}/connectivity/1/2", 5.0,
        f"{BLOCK}/connectivity/1/2", "node number|5.0"),
    Bad("node number negative", "mesh", f"{BLOCK}/connectivity/0/0", -1,
        f"{BLOCK}/connectivity/0/0", "node number|-1"),
    Bad("node number beyond the nodes", "mesh", f"{BLOCK}/connectivity/1/2", 7,
        f"{BLOCK}/connectivity/1/2", "no node 7|0 to 6"),
    Bad("block of unknown region", "mesh", f"{BLOCK}/region", "webb", f"{BLOCK}/region",
        "no region|web"),
    Bad("side with one node", "mesh", "/geometry/mesh/sides/low/1", [1],
        "/geometry/mesh/sides/low/1", "2 or 3"),
    Bad("side beyond the nodes", "mesh", "/geometry/mesh/sides/low/1/0", 9,
        "/geometry/mesh/sides/low/1/0", "no node 9"),
    Bad("point beyond the nodes", "mesh", "/geometry/mesh/points/nose", 7,
        "/geometry/mesh/points/nose", "no node 7"),
    Bad("point by its place", "mesh", "/geometry/mesh/points/far", [3, 0.5],
        "/geometry/mesh/points/far", "whole number"),
    Bad("points outside the mesh", "mesh", "/geometry/points", {"P": [0, 0]}, "/geometry/points",
        "mesh.points"),
    Bad("side and point of one name", "mesh", "/geometry/mesh/points/low", 2,
        "/geometry/mesh/points/low", "already|side"),
    Bad("meshing of a mesh", "mesh", "/meshing", {"size": 1}, "/meshing/size", "no effect"),
]  # fmt: skip

MESHING = [
    Bad("meshing with an unknown type", "outline", "/meshing/element", "Q9", "/meshing/element",
        "Q9|Q8"),
    Bad("size zero", "outline", "/meshing/size", "0 mm", "/meshing/size", "above 0"),
    Bad("size at nothing", "outline", "/meshing/sizes/pinn", 2, "/meshing/sizes/pinn",
        "pinn|did you mean|pin"),
    Bad("target error one", "outline", "/meshing/target_error", 1, "/meshing/target_error",
        "below 1"),
    Bad("limit without target", "outline", "/meshing/target_error", DROP, "/meshing/max_dofs",
        "target_error"),
    Bad("target error of a mesh", "mesh", "/meshing", {"target_error": 0.05},
        "/meshing/target_error", "finished mesh"),
    Bad("convergence of a mesh", "mesh", "/requests", {"convergence": True},
        "/requests/convergence", "finished mesh"),
    Bad("convergence as a number", "outline", "/requests/convergence", 1,
        "/requests/convergence", "true or false"),
    Bad("size of patches", "patches", "/meshing/size", 2, "/meshing/size", "divisions"),
    Bad("unknown method", "outline", "/meshing/method", "mapped", "/meshing/method", "free"),
]  # fmt: skip

SUPPORTS = [
    Bad("support nowhere", "mesh", "/supports/0/on", DROP, "/supports/0/on", "required"),
    Bad("support on nothing", "outline", "/supports/0/on", "bsae", "/supports/0/on",
        "bsae|did you mean|base"),
    Bad("support on a number", "outline", "/supports/0/on", 3, "/supports/0/on", "selector|3"),
    Bad("support on a place", "outline", "/supports/0/on", [0, 0], "/supports/0/on",
        "a list of 2|geometry.points"),
    Bad("support that holds nothing", "outline", "/supports/-", {"on": "base"}, "/supports/7",
        "ux, uy, normal, along, spring"),
    Bad("displacement a stress", "outline", "/supports/0/ux", "1 MPa", "/supports/0/ux",
        "force per area|a length"),
    Bad("displacement without direction", "outline", "/supports/0/displacement", 1,
        "/supports/0/displacement", "along"),
    Bad("no direction", "outline", "/supports/3/along", [0, 0], "/supports/3/along", "direction"),
    Bad("direction with a unit", "outline", "/supports/3/along/0", "1 mm", "/supports/3/along/0",
        "number"),
    Bad("spring of nothing", "outline", "/supports/2/spring", {"x": 0}, "/supports/2/spring",
        "above zero"),
    Bad("spring negative", "outline", "/supports/2/spring/x", -1, "/supports/2/spring/x",
        "at least 0"),
    Bad("spring of a point on a side", "outline", "/supports/2/spring/x", "5 kN/mm",
        "/supports/2/spring/x", "side|50 N/mm2"),
    Bad("spring of a side at a point", "outline", "/supports/3/spring/y", "5 N/mm2",
        "/supports/3/spring/y", "point|5 kN/mm"),
    Bad("spring with a unit in a box", "outline", "/supports/5/spring", {"x": "5 N/mm2"},
        "/supports/5/spring/x", "plain number"),
    Bad("spring with a unit on nodes", "mesh", "/supports/1/spring/y", "9 kN/m",
        "/supports/1/spring/y", "plain number"),
    Bad("spring normal to a point", "outline", "/supports/3/spring/normal", 1,
        "/supports/3/spring/normal", "point|x and y"),
    Bad("spring on a region", "outline", "/supports/-", {"on": "boss", "spring": {"x": 1}},
        "/supports/7/spring", "region"),
    Bad("normal of a point", "outline", "/supports/3/normal", 0, "/supports/3/normal",
        "point|no normal"),
    Bad("normal of a region", "outline", "/supports/-", {"on": "boss", "normal": 0},
        "/supports/7/normal", "region|no normal"),
    Bad("support in an unknown case", "outline", "/supports/1/case", "setled", "/supports/1/case",
        "no load case|settled"),
    Bad("case without a value", "outline", "/supports/0/case", "lift", "/supports/0/case",
        "no effect|ux, uy"),
    Bad("two supports of one name", "outline", "/supports/-",
        {"name": "foundation", "on": "right", "ux": 0}, "/supports/7/name", "another support"),
    Bad("empty selector", "outline", "/supports/4/on", {}, "/supports/4/on",
        "exactly one|segment, box, circle, nodes"),
    Bad("two selectors", "outline", "/supports/4/on/box", [[0, 0], [1, 1]], "/supports/4/on",
        "segment and box"),
    Bad("segment of one point", "outline", "/supports/4/on/segment", [[1, 1], [1, 1]],
        "/supports/4/on", "differ"),
    Bad("tolerance zero", "outline", "/supports/4/on/tolerance", 0, "/supports/4/on/tolerance",
        "above 0"),
    Bad("tolerance with nodes", "mesh", "/supports/1/on/tolerance", 1, "/supports/1/on/tolerance",
        "nodes"),
    Bad("node numbers of an outline", "outline", "/supports/4/on", {"nodes": [1]},
        "/supports/4/on/nodes", "geometry.mesh"),
    Bad("node number that is none", "mesh", "/supports/1/on/nodes/1", 7, "/supports/1/on/nodes/1",
        "no node 7|0 to 6"),
    Bad("empty list of node numbers", "mesh", "/supports/1/on/nodes", [], "/supports/1/on/nodes",
        "1 to|0"),
]  # fmt: skip

LOADS = [
    Bad("force without direction", "outline", f"{LIFT}/1/force", 9, f"{LIFT}/1/force",
        "list of two, [x, y]|9"),
    Bad("load of no kind", "outline", f"{LIFT}/1", {"on": "tip"}, f"{LIFT}/1",
        "exactly one|pressure|none"),
    Bad("load of two kinds", "outline", f"{LIFT}/1/pressure", 1, f"{LIFT}/1", "force and pressure"),
    Bad("load misspelt", "outline", f"{WIND}/-", {"on": "right", "presure": 1}, f"{WIND}/6/presure",
        "unknown key|pressure"),
    Bad("force nowhere", "outline", f"{LIFT}/1/on", DROP, f"{LIFT}/1/on", "required|force"),
    Bad("pressure nowhere", "outline", f"{WIND}/3/on", DROP, f"{WIND}/3/on", "required|pressure"),
    Bad("force on a side", "outline", f"{LIFT}/1/on", "base", f"{LIFT}/1/on",
        "a point|a side|total_force"),
    Bad("pressure at a point", "outline", f"{WIND}/3/on", "tip", f"{WIND}/3/on",
        "a side or a hole|a point"),
    Bad("pressure on a region", "outline", f"{WIND}/3/on", "boss", f"{WIND}/3/on", "a region"),
    Bad("bearing on nothing", "outline", f"{LIFT}/0/on", "pinn", f"{LIFT}/0/on",
        "did you mean|pin"),
    Bad("heating of a side", "outline", f"{SUN}/0/on", "base", f"{SUN}/0/on",
        "a region|whole plate"),
    Bad("heating of the plate by name", "outline", f"{SUN}/0/on", "plate", f"{SUN}/0/on",
        "no region|plate|boss"),
    Bad("heating of a box", "outline", f"{SUN}/0/on", {"box": [[0, 0], [1, 1]]}, f"{SUN}/0/on",
        "region by name"),
    Bad("force in newton metres", "outline", f"{LIFT}/1/force/0", "1 N*m", f"{LIFT}/1/force/0",
        "a moment|a force"),
    Bad("force by mass", "outline", f"{LIFT}/1/force/1", "100 lb", f"{LIFT}/1/force/1",
        "a mass|a force"),
    Bad("force of three parts", "outline", f"{LIFT}/1/force", [1, 2, 3], f"{LIFT}/1/force",
        "2 entries|3"),
    Bad("pressure from nowhere", "outline", f"{WIND}/3/pressure/from", DROP,
        f"{WIND}/3/pressure/from", "required"),
    Bad("pressure in between", "outline", f"{WIND}/3/pressure/middle", 1,
        f"{WIND}/3/pressure/middle", "from, to"),
    Bad("traction to a number", "outline", f"{WIND}/2/traction/to", 1, f"{WIND}/2/traction/to",
        "list"),
    Bad("line load as a stress", "outline", f"{WIND}/5/line_load/0", "5 MPa",
        f"{WIND}/5/line_load/0", "force per area|force per length"),
    Bad("moment as a force", "outline", f"{WIND}/1/total_moment", "2 kN", f"{WIND}/1/total_moment",
        "a force|a moment"),
    Bad("gravity as a velocity", "outline", "/load_cases/self weight/0/acceleration/1", "-9.81 m/s",
        "/load_cases/self weight/0/acceleration/1", "a velocity|an acceleration"),
    Bad("spin about nothing", "outline", f"{TURNING}/0/spin/about", DROP,
        f"{TURNING}/0/spin/about", "required"),
    Bad("spin in degrees", "outline", f"{TURNING}/0/spin/speed", "90 deg",
        f"{TURNING}/0/spin/speed", "without dimension|3000 rpm"),
    Bad("temperature as a length", "outline", f"{SUN}/0/temperature_change", "20 m",
        f"{SUN}/0/temperature_change", "a length|temperature change"),
    Bad("case without loads", "mesh", "/load_cases/idle", [], "/load_cases/idle", "no loads"),
    Bad("case an object", "outline", f"{SUN}", {}, SUN, "list"),
    Bad("case name with a slash", "mesh", "/load_cases/a\\b", [{"on": "nose", "force": [1, 1]}],
        "/load_cases/a\\b", "not a name"),
]  # fmt: skip

RESULTS = [
    Bad("combination of an unknown case", "outline", "/combinations/lift x 1.5/lft", 1,
        "/combinations/lift x 1.5/lft", "no load case|lift"),
    Bad("combination of nothing", "outline", "/combinations/none", {}, "/combinations/none",
        "1 to"),
    Bad("combination named like a case", "outline", "/combinations/lift", {"lift": 1},
        "/combinations/lift", "already|load case"),
    Bad("factor text", "outline", "/combinations/lift x 1.5/lift", "1.5",
        "/combinations/lift x 1.5/lift", "number"),
    Bad("probe in one dimension", "outline", "/requests/probes/side of pin", [56],
        "/requests/probes/side of pin", "2 entries"),
    Bad("line of one point", "outline", "/requests/lines/net section/points", 1,
        "/requests/lines/net section/points", "2 to 2001"),
    Bad("line to nowhere", "outline", "/requests/lines/net section/to", DROP,
        "/requests/lines/net section/to", "required"),
    Bad("cut of no length", "outline", "/requests/cuts/root/to", [0, 5], "/requests/cuts/root",
        "differ"),
    Bad("hot spot without a direction", "outline", "/requests/hot_spots/toe/direction", [0, 0],
        "/requests/hot_spots/toe/direction", "must be a direction"),
    Bad("hot spot of no thickness", "outline", "/requests/hot_spots/toe/thickness", 0,
        "/requests/hot_spots/toe/thickness", "above 0"),
    Bad("hot spot on a plate of several thicknesses", "outline",
        "/requests/hot_spots/toe/thickness", DROP, "/requests/hot_spots/toe/thickness",
        "regions of other thickness"),
    Bad("unknown request", "outline", "/requests/prob", {}, "/requests/prob", "unknown key|probes"),
    Bad("displacement limit zero", "outline", "/limits/displacement", 0, "/limits/displacement",
        "above 0"),
    Bad("factor on yield with a unit", "outline", "/limits/factor_on_yield", "2 MPa",
        "/limits/factor_on_yield", "number"),
]  # fmt: skip

TABLE = [
    *SECTIONS, *MATERIALS, *OUTLINES, *PATCHES_AND_MESHES, *MESHING, *SUPPORTS, *LOADS, *RESULTS,
]  # fmt: skip


@pytest.mark.parametrize("kind", KINDS)
def test_unchanged_documents_have_no_fault(kind: str) -> None:
    """So that every fault below comes from the change alone."""
    load(good(kind))


@pytest.mark.parametrize("bad", TABLE, ids=[bad.name for bad in TABLE])
def test_one_change_gives_one_fault_in_its_place(bad: Bad) -> None:
    document = good(bad.kind)
    change(document, bad.at, bad.value)
    with pytest.raises(DocumentError) as caught:
        load(document)
    assert [fault.pointer for fault in caught.value.faults] == [bad.pointer]
    for words in bad.words.split("|"):
        assert words in caught.value.faults[0].message


@pytest.mark.parametrize(("ux", "moves"), [(0, False), ("0 mm", False), ("2 mm", True), (-1, True)])
@pytest.mark.parametrize("case", [None, "tide"])
def test_a_case_without_loads_needs_a_support_that_moves(
    ux: Any, moves: bool, case: str | None
) -> None:
    document = good("mesh")
    document["load_cases"]["tide"] = []
    document["supports"][0] |= {"ux": ux} | ({"case": case} if case and moves else {})
    if moves:
        load(document)
        return
    with pytest.raises(DocumentError) as caught:
        load(document)
    assert [fault.pointer for fault in caught.value.faults] == ["/load_cases/tide"]


@pytest.mark.parametrize(
    ("load_of_case", "asked"),
    [
        ({"acceleration": [0, -9.81]}, ["/materials/steel/density", "/materials/tin/density"]),
        ({"spin": {"about": [0, 0], "speed": 1}, "on": "web"}, ["/materials/tin/density"]),
        ({"temperature_change": 20, "on": "web"}, ["/materials/tin/thermal_expansion"]),
        ({"body_force": [0, -77]}, []),
    ],
)
def test_a_load_asks_only_the_materials_that_it_acts_on(
    load_of_case: dict[str, Any], asked: list[str]
) -> None:
    document = good("mesh")
    document["materials"]["tin"] = {"youngs_modulus": "50 GPa", "poissons_ratio": 0.36}
    document["geometry"]["regions"][0]["material"] = "tin"
    document["load_cases"]["pull"].append(load_of_case)
    assert pointers_of(document) == asked


def test_a_material_that_is_nowhere_in_the_plate_is_asked_nothing() -> None:
    document = good("mesh")
    document["materials"]["tin"] = {"youngs_modulus": 5e7, "poissons_ratio": 0.36, "density": 7.3}
    document["geometry"]["regions"][0]["material"] = "tin"
    document["geometry"]["mesh"]["blocks"][1]["region"] = "web"
    document["load_cases"]["pull"].append({"acceleration": [0, -9.81]})
    assert pointers_of(document) == []


def pointers_of(document: Any) -> list[str]:
    """Places of the faults of a document, none if it is good."""
    try:
        load(document)
    except DocumentError as error:
        return [fault.pointer for fault in error.faults]
    return []


def test_the_table_is_long_and_its_names_are_distinct() -> None:
    """At least 75 distinct bad documents."""
    assert len({bad.name for bad in TABLE}) == len(TABLE) >= 75
