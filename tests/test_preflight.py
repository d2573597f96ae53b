"""What a client is told, before anything is solved, about a job that cannot work.

Documents go the whole way: read, meshed, and looked over. All plates are made up.
"""

import copy
import math
from collections.abc import Callable
from typing import Any

import orjson
import pytest

from tests.job_documents import strip
from workers import preflight as preflight_module
from workers.analysis.mesh import Mesh
from workers.document.read import read_document
from workers.errors import DocumentError
from workers.model_hash import model_hash
from workers.preflight import MODELS, Foresight, preflight

Document = dict[str, Any]
Change = Callable[[Document], None]


def look(document: Document) -> Mesh | None:
    return preflight(read_document(orjson.dumps(document)))


def faults_of(document: Document) -> list[tuple[str, str]]:
    with pytest.raises(DocumentError) as caught:
        look(document)
    return [(fault.pointer, fault.message) for fault in caught.value.faults]


def bracket() -> Document:
    """A quarter of a ring (bore 10, rim 30) in two patches, the upper one thicker, held at its
    foot and pressed in its bore; the foot is on y = 0."""
    document = strip()
    s = math.sqrt(0.5)
    low = {
        "name": "low",
        "corners": [[10, 0], [30, 0], [30 * s, 30 * s], [10 * s, 10 * s]],
        "through": [None, [30 * math.cos(0.4), 30 * math.sin(0.4)], None,
                    [10 * math.cos(0.4), 10 * math.sin(0.4)]],
        "divisions": [3, 4],
        "sides": ["foot", "rim", "joint", "bore"],
    }  # fmt: skip
    high = {
        "name": "high",
        "corners": [[10 * s, 10 * s], [30 * s, 30 * s], [0, 30], [0, 10]],
        "through": [None, [30 * math.cos(1.2), 30 * math.sin(1.2)], None,
                    [10 * math.cos(1.2), 10 * math.sin(1.2)]],
        "divisions": [3, 4],
        "sides": [None, "rim", "head", "bore"],
        "region": "boss",
    }  # fmt: skip
    document["geometry"] = {
        "patches": [low, high],
        "regions": [{"name": "boss", "thickness": 12}],
        "points": {"toe": [30, 0], "crown": [0, 30]},
    }
    document["supports"] = [{"on": "foot", "ux": 0, "uy": 0}]
    document["load_cases"] = {"press": [{"on": "bore", "pressure": 5}]}
    return document


def own_mesh() -> Document:
    """Two squares of 2 side by side, and a third one apart from x = 6 on; Q4."""
    document = strip()
    del document["meshing"]
    document["geometry"] = {
        "mesh": {
            "nodes": [[0, 0], [2, 0], [4, 0], [0, 2], [2, 2], [4, 2],
                      [6, 0], [8, 0], [8, 2], [6, 2]],
            "blocks": [
                {"element": "Q4", "connectivity": [[0, 1, 4, 3], [1, 2, 5, 4], [6, 7, 8, 9]]}
            ],
            "sides": {"left": [[0, 3]], "far": [[7, 8]], "middle": [[1, 4]]},
            "points": {"tip": 8},
        }
    }  # fmt: skip
    document["supports"] = [
        {"on": "left", "ux": 0, "uy": 0},
        {"on": {"nodes": [6, 9]}, "ux": 0, "uy": 0},
    ]
    document["load_cases"] = {"pull": [{"on": "far", "traction": [1, 0]}]}
    return document


def changed(document: Document, changes: dict[str, Any]) -> Document:
    """A copy with values set at JSON pointers; ... as a value removes the key."""
    document = copy.deepcopy(document)
    for pointer, value in changes.items():
        *path, last = (int(t) if t.isdigit() else t for t in pointer.split("/")[1:])
        place: Any = document
        for token in path:
            place = place[token]
        if value is ...:
            del place[last]
        elif isinstance(place, list) and last == len(place):
            place.append(value)
        else:
            place[last] = value
    return document


# --- sound jobs --------------------------------------------------------------------------------


@pytest.mark.parametrize("document", [strip(), bracket(), own_mesh()])
@pytest.mark.parametrize("element", ["T3", "Q4", "T6", "Q8"])
def test_a_sound_job_gives_its_mesh(document: Document, element: str) -> None:
    if "meshing" in document:
        document = changed(document, {"/meshing/element": element})
    mesh = look(document)
    assert mesh is not None
    assert mesh.element_count > 0


@pytest.mark.parametrize(
    "changes",
    [
        pytest.param({"/supports/0": {"on": "foot", "spring": {"x": 1, "y": 1}}}, id="springs"),
        pytest.param({"/supports/0": {"on": "bore", "normal": 0},
                      "/supports/1": {"on": "toe", "uy": 0}, "/load_cases/press/0/on": "rim"},
                     id="roller on a curved side"),
        pytest.param({"/supports/0": {"on": "boss", "ux": 0, "uy": 0}}, id="a region"),
        pytest.param({"/supports/0": {"on": "foot", "along": [0, 1]},
                      "/supports/1": {"on": "toe", "along": [1, 1]}}, id="skew"),
        pytest.param({"/supports/0/on": {"segment": [[10, 0], [30, 0]]}}, id="segment"),
        pytest.param({"/supports/0/on": {"box": [[9, -1], [31, 0.1]]}}, id="box"),
        pytest.param({"/load_cases/press/0/on": {"circle": {"centre": [0, 0], "radius": 10}}},
                     id="circle"),
        pytest.param({"/load_cases/press/0/pressure": {"from": 1, "to": 3}}, id="varying"),
        pytest.param({"/load_cases/press/0": {"on": "joint", "line_load": [1, 0]}},
                     id="line load inside"),
        pytest.param({"/load_cases/press/0": {"on": "boss", "acceleration": [0, -9810]}},
                     id="weight of a region"),
        pytest.param({"/requests": {"probes": {"a": [0, 10], "b": [20, 0.001]},
                                    "lines": {"l": {"from": [10, 0], "to": [30, 0]}},
                                    "cuts": {"c": {"from": [5, 5], "to": [25, 25]}}}},
                     id="requests"),
    ],
)  # fmt: skip
def test_what_can_work_is_accepted(changes: dict[str, Any]) -> None:
    assert look(changed(bracket(), changes)) is not None


@pytest.mark.parametrize("element", ["T3", "Q4", "T6", "Q8"])
def test_a_probe_on_a_true_arc_is_inside_whatever_the_element(element: str) -> None:
    """Rim and bore at 4 facets to 45 degrees: chords leave the rim by 0.005 of the radius."""
    angles = [math.radians(degrees) for degrees in (3, 17, 44, 80)]
    probes = {
        f"{radius} {k}": [radius * math.cos(a), radius * math.sin(a)]
        for radius in (10, 30)
        for k, a in enumerate(angles)
    }
    changes = {"/requests": {"probes": probes}, "/meshing/element": element}
    assert look(changed(bracket(), changes)) is not None


# --- jobs that cannot work ---------------------------------------------------------------------

ROLLERS = {"/supports/0": {"on": "foot", "uy": 0}}
REQUESTED: dict[str, tuple[dict[str, Any], str, list[str]]] = {
    # supports
    "unknown name": (
        {"/supports/0/on": "fot"}, "/supports/0/on", ["fot", "did you mean", "foot"],
    ),
    "free x": (ROLLERS, "/supports", ["the plate can move in x", "add a support"]),
    "free y": (
        {"/supports/0": {"on": "head", "ux": 0}}, "/supports", ["the plate can move in y"],
    ),
    "free rotation": (
        {"/supports/0": {"on": "toe", "ux": 0, "uy": 0}},
        "/supports",
        ["the plate can rotate about (30, 0)"],
    ),
    "free rotation on a circular roller": (
        {"/supports/0": {"on": "rim", "normal": 0}},
        "/supports",
        ["the plate can rotate about (0, 0)"],
    ),
    "free rotation on springs round the bore": (
        {"/supports/0": {"on": "bore", "spring": {"normal": 100}},
         "/load_cases/press/0/on": "head"},
        "/supports",
        ["the plate can rotate about (0, 0)"],
    ),
    "free rotation on a graded roller": (
        {"/supports/0": {"on": "rim", "normal": 0}, "/geometry/patches/0/grading": [1, 3]},
        "/supports",
        ["the plate can rotate about (0, 0)"],
    ),
    "springs in one direction only": (
        {"/supports/0": {"on": "foot", "spring": {"y": 100}}},
        "/supports",
        ["the plate can move in x"],
    ),
    "normal at a point": (
        {"/supports/0": {"on": "toe", "normal": 0}}, "/supports/0", ["normal"],
    ),
    "node numbers on patches": (
        {"/supports/0/on": {"nodes": [0, 1]}},
        "/supports/0/on/nodes",
        ["only a mesh of your own"],
    ),
    "segment beside the plate": (
        {"/supports/0/on": {"segment": [[10, -1], [30, -1]]}},
        "/supports/0/on",
        ["no boundary lies on the segment", "nearest boundary node", "1 away"],
    ),
    "segment that ends inside a facet": (
        {"/supports/0/on": {"segment": [[10, 0], [28, 0]]}},
        "/supports/0/on",
        ["ends inside the element side"],
    ),
    "empty box": (
        {"/supports/0/on": {"box": [[50, 50], [60, 60]]}},
        "/supports/0/on",
        ["no node lies in the box", "nearest node"],
    ),
    "circle without border": (
        {"/load_cases/press/0/on": {"circle": {"centre": [0, 0], "radius": 20}}},
        "/load_cases/press/0/on",
        ["no boundary lies on the circle of radius 20"],
    ),
    # loads
    "point force on a side": (
        {"/load_cases/press/0": {"on": "bore", "force": [1, 0]}},
        "/load_cases/press/0",
        ["force", "total_force"],
    ),
    "point force on a segment": (
        {"/load_cases/press/0": {"on": {"segment": [[10, 0], [30, 0]]}, "force": [1, 0]}},
        "/load_cases/press/0/on",
        ["acts at one point", " nodes here", "total_force"],
    ),
    "pressure at a point": (
        {"/load_cases/press/0": {"on": "toe", "pressure": 1}},
        "/load_cases/press/0",
        ["toe"],
    ),
    "pressure inside the plate": (
        {"/load_cases/press/0": {"on": "joint", "pressure": 1}},
        "/load_cases/press/0/on",
        ["material on both sides", "line_load"],
    ),
    "pressure on a region": (
        {"/load_cases/press/0": {"on": "boss", "pressure": 1}},
        "/load_cases/press/0",
        ["boss"],
    ),
    "traction on a box of nodes": (
        {"/load_cases/press/0": {"on": {"box": [[29.9, -0.1], [30.1, 0.1]]}, "traction": [1, 0]}},
        "/load_cases/press/0/on",
        ["acts on a side", "only points"],
    ),
    "weight of a box without elements": (
        {"/load_cases/press/0": {"on": {"box": [[10, 0], [30, 0]]}, "acceleration": [0, 1]}},
        "/load_cases/press/0/on",
        ["region"],
    ),
    "varying load on a side in two pieces": (
        {
            "/geometry/patches/1/sides/1": "foot",
            "/load_cases/press/0": {"on": "foot", "line_load": {"from": [0, 0], "to": [0, 1]}},
        },
        "/load_cases/press/0/on",
        ["one connected side", "separate pieces"],
    ),
    # requests
    "probe in the bore": (
        {"/requests": {"probes": {"pin": [0, 0]}}},
        "/requests/probes/pin",
        ["(0, 0) is outside the plate", "nearest point of its border"],
    ),
    "probe beyond the rim": (
        {"/requests": {"probes": {"out": [40, 30]}}},
        "/requests/probes/out",
        ["outside the plate", "nearest point of its border is (24.", "20.0"],
    ),
    "line that leaves the plate": (
        {"/requests": {"lines": {"l": {"from": [11, 1], "to": [1, 11]}}}},
        "/requests/lines/l",
        ["is outside the plate"],
    ),
    "hot spot that looks out of the plate": (
        {"/requests": {"hot_spots": {"toe": {"at": [15, 0], "direction": [0, -1],
                                             "thickness": 2}}}},
        "/requests/hot_spots/toe",
        ["(15, -0.8) is outside the plate", "is the direction right"],
    ),
    "cut beside the plate": (
        {"/requests": {"cuts": {"c": {"from": [0, -5], "to": [40, -5]}}}},
        "/requests/cuts/c",
        ["does not cross the plate"],
    ),
    "cut that ends inside": (
        {"/requests": {"cuts": {"c": {"from": [5, 5], "to": [14, 14]}}}},
        "/requests/cuts/c",
        ["ends inside the plate"],
    ),
    # patches
    "clockwise patch": (
        {"/geometry/patches/0/corners": [[10, 0], [0, 10], [0, 30], [30, 0]],
         "/geometry/patches/0/through": [None] * 4},
        "/geometry/patches/0/corners",
        ["clockwise"],
    ),
    "folded patch": (
        {"/geometry/patches/0/corners/2": [12, 1]},
        "/geometry/patches/0/corners/2",
        ["angle of", "below 180"],
    ),
    "divisions that do not match": (
        {"/geometry/patches/1/divisions": [4, 4]},
        "/geometry/patches/1/sides/0",
        ["3 and 4 divisions"],
    ),
    "gradings that do not match": (
        {"/geometry/patches/1/grading": [2, 1]},
        "/geometry/patches/1/sides/0",
        ["gradings differ"],
    ),
    "through on the chord": (
        {"/geometry/patches/0/through/0": [20, 0]},
        "/geometry/patches/0/through/0",
        ["(20, 0) lies in line"],
    ),
    "point off the nodes": (
        {"/geometry/points/mark": [11, 1]},
        "/geometry/points/mark",
        ["is not a node", "nearest node"],
    ),
}  # fmt: skip


@pytest.mark.parametrize("case", REQUESTED)
@pytest.mark.parametrize("element", ["T3", "Q8"])
def test_a_bracket_that_cannot_work_is_refused(case: str, element: str) -> None:
    changes, pointer, words = REQUESTED[case]
    document = changed(bracket(), {"/meshing/element": element} | changes)
    _expect(document, pointer, words)


OWN: dict[str, tuple[dict[str, Any], str, list[str]]] = {
    "part without support": (
        {"/supports/1": ...},
        "/supports",
        ["part 2 of 2 (4 nodes around (7, 1)) has no support at all"],
    ),
    "part that can move in x": (
        {"/supports/1": {"on": {"nodes": [6, 7]}, "uy": 0}},
        "/supports",
        ["part 2 of 2", "can move in x"],
    ),
    "part that can rotate": (
        {"/supports/1/on": {"nodes": [6]}},
        "/supports",
        ["part 2 of 2", "can rotate about (6, 0)"],
    ),
    "empty list of nodes": (
        {"/supports/1/on": {"nodes": []}}, "/supports/1/on/nodes", [""],
    ),
    "node that does not exist": (
        {"/supports/1/on": {"nodes": [6, 77]}},
        "/supports/1/on/nodes/1",
        ["there is no node 77"],
    ),
    "clockwise element": (
        {"/geometry/mesh/blocks/0/connectivity/1": [1, 4, 5, 2]},
        "/geometry/mesh/blocks/0/connectivity/1",
        ["element 1, Q4 with corners 1, 4, 5, 2 is listed clockwise (area -4)"],
    ),
    "flat element": (
        {"/geometry/mesh/nodes/5": [4, 0.0], "/geometry/mesh/nodes/4": [2, 0.0],
         "/geometry/mesh/nodes/2": [4, 1e-12]},
        "/geometry/mesh/blocks/0/connectivity/1",
        ["is flat"],
    ),
    "number out of range": (
        {"/geometry/mesh/blocks/0/connectivity/0/2": 44},
        "/geometry/mesh/blocks/0/connectivity/0/2",
        ["there is no node 44"],
    ),
    "coincident nodes": (
        {"/geometry/mesh/nodes/6": [4, 0], "/geometry/mesh/nodes/9": [4, 2]},
        "/geometry/mesh/nodes/6",
        ["nodes 2 and 6 are at the same place, (4, 0)"],
    ),
    "orphan node": (
        {"/geometry/mesh/nodes/10": [9, 9]},
        "/geometry/mesh/nodes/10",
        ["node 10 at (9, 9) belongs to no element"],
    ),
    "side edge that does not exist": (
        {"/geometry/mesh/sides/left/0": [0, 4]},
        "/geometry/mesh/sides/left/0",
        ["no element has a side from corner node 0 (0, 0) to corner node 4 (2, 2)"],
    ),
    "hanging node": (
        {"/geometry/mesh/nodes/6": [4, 0.5], "/geometry/mesh/nodes/9": [4, 1.5]},
        "/geometry/mesh/blocks/0/connectivity/1",
        ["node 6 at (4, 0.5) lies on the side 2-5 of element 1"],
    ),
    "overlap": (
        {"/geometry/mesh/nodes/6": [3, 0.5], "/geometry/mesh/nodes/9": [3, 1.5]},
        "/geometry/mesh/blocks/0/connectivity/2",
        ["crosses the side"],
    ),
}  # fmt: skip


@pytest.mark.parametrize("case", OWN)
def test_an_own_mesh_that_cannot_work_is_refused(case: str) -> None:
    changes, pointer, words = OWN[case]
    _expect(changed(own_mesh(), changes), pointer, words)


def _expect(document: Document, pointer: str, words: list[str]) -> None:
    """A fault at that place (or just inside) says all the words."""
    found = faults_of(document)
    said = [message for place, message in found if f"{place}/".startswith(f"{pointer}/")]
    assert any(all(word in message for word in words) for message in said), found


def test_faults_of_supports_loads_and_requests_come_together() -> None:
    changes = {
        "/supports/0/on": {"box": [[50, 50], [60, 60]]},
        "/load_cases/press/0": {"on": "joint", "pressure": 1},
        "/requests": {"probes": {"pin": [0, 0]}},
    }
    places = [place for place, _ in faults_of(changed(bracket(), changes))]
    assert places == ["/supports/0/on", "/load_cases/press/0/on", "/requests/probes/pin"]


def test_a_wrong_target_in_many_cases_is_reported_in_each() -> None:
    load = {"on": {"box": [[50, 50], [60, 60]]}, "acceleration": [0, 1]}
    changes = {"/load_cases": {"one": [load], "two": [load, load]}}
    places = [place for place, _ in faults_of(changed(bracket(), changes))]
    assert places == [f"/load_cases/{name}/on" for name in ("one/0", "two/0", "two/1")]


# --- models that come again -----------------------------------------------------------------------


def foresee(foresight: Foresight, document: Document) -> Mesh | None:
    job = read_document(orjson.dumps(document))
    return foresight.foresee(job, model_hash(job)).mesh


def test_a_model_that_comes_again_is_not_meshed_again(monkeypatch: pytest.MonkeyPatch) -> None:
    foresight = Foresight()
    first = foresee(foresight, strip())
    monkeypatch.setattr(preflight_module, "mesh_directly", lambda *_: pytest.fail("meshed"))
    assert foresee(foresight, strip(force=1.0)) is first


def test_loads_and_requests_of_a_known_model_are_looked_over_all_the_same() -> None:
    foresight = Foresight()
    foresee(foresight, strip())
    lost = strip()
    lost["load_cases"]["pull"] = [{"on": {"box": [[500, 0], [600, 1]]}, "total_force": [1, 0]}]
    lost["requests"] = {"probes": {"far": [1e4, 0]}}
    with pytest.raises(DocumentError) as known:
        foresee(foresight, lost)
    with pytest.raises(DocumentError) as unknown:
        foresee(Foresight(), lost)
    assert known.value.faults == unknown.value.faults
    assert len(known.value.faults) == 2
    assert foresee(foresight, strip()) is not None


def test_another_model_is_another_mesh() -> None:
    foresight = Foresight()
    meshes = [foresee(foresight, strip(length=float(length))) for length in (100, 200)]
    lengths = [mesh.nodes[:, 0].max() for mesh in meshes if mesh is not None]
    assert lengths == [100.0, 200.0]


def test_only_the_last_models_are_remembered() -> None:
    foresight = Foresight()
    first = foresee(foresight, strip())
    for length in range(MODELS - 1):
        foresee(foresight, strip(length=200.0 + length))
    assert foresee(foresight, strip()) is first  # used again: now the last
    for length in range(MODELS):
        foresee(foresight, strip(length=300.0 + length))
    assert foresee(foresight, strip()) is not first
