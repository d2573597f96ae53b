"""Jobs of one model worked on one after the other come out as if each had been alone."""

import copy
from pathlib import Path
from typing import Any

import numpy as np
import orjson
import pytest

from tests.good_documents import KINDS, good
from tests.job_documents import strip
from workers import pipeline
from workers.document.read import load
from workers.errors import FaultyError
from workers.model_hash import model_hash
from workers.shared_model import SharedModel

FORCES = ([32_000, 0], [0, -500], [-100, 2000])


def job(force: list[float], **parts: Any) -> dict[str, Any]:
    return {
        **strip(),
        "supports": [{"on": "left", "ux": 0, "uy": 0}],
        "load_cases": {"push": [{"on": "right", "total_force": force}]},
        **parts,
    }


def solve(folder: Path, document: dict[str, Any], shared: SharedModel | None = None) -> Any:
    folder.mkdir(parents=True)
    results = pipeline.run(orjson.dumps(document), folder, pictures=0, shared=shared)
    del results["solver"]["seconds"]
    # `job` says when it was solved
    return {name: part for name, part in results.items() if name != "job"}


def test_shared_and_alone_are_the_same_byte_for_byte(tmp_path: Path) -> None:
    shared = SharedModel()
    for number, force in enumerate(FORCES):
        alone = solve(tmp_path / "alone" / str(number), job(force))
        together = solve(tmp_path / "shared" / str(number), job(force), shared)
        assert together == alone
        for name in ("displacements.npy", "fields/push.vtu"):
            one, other = (tmp_path / way / str(number) / name for way in ("alone", "shared"))
            assert one.read_bytes() == other.read_bytes()


def test_the_matrix_is_factorised_once(tmp_path: Path) -> None:
    shared = SharedModel()
    folders = [tmp_path / str(number) for number in range(3)]
    for folder, force in zip(folders, FORCES, strict=True):
        solve(folder, job(force), shared)
    seconds = [
        orjson.loads((folder / "results.json").read_bytes())["solver"]["seconds"]
        for folder in folders
    ]
    assert ["factorise" in stages for stages in seconds] == [True, False, False]


def test_a_job_with_a_faulty_load_or_request_fails_alone(tmp_path: Path) -> None:
    """On the shared mesh its places are looked at as they would be on its own."""
    shared = SharedModel()
    solve(tmp_path / "first", job(FORCES[0]), shared)
    outside = job(FORCES[1], requests={"probes": {"far": [1e4, 0]}})
    nowhere = job(FORCES[1])
    nowhere["load_cases"]["more"] = [{"on": {"box": [[500, 0], [600, 1]]}, "total_force": [1, 0]}]
    for number, bad in enumerate((outside, nowhere)):
        with pytest.raises(FaultyError) as alone:
            solve(tmp_path / f"alone {number}", bad)
        with pytest.raises(FaultyError) as together:
            solve(tmp_path / f"shared {number}", bad, shared)
        assert together.value.faults == alone.value.faults
    assert solve(tmp_path / "last", job(FORCES[2]), shared) == solve(
        tmp_path / "last alone", job(FORCES[2])
    )


def test_prescribed_displacements_belong_to_each_job(tmp_path: Path) -> None:
    """Jobs of one model may name the same support's case differently loaded, or not at all."""
    shared = SharedModel()
    supports = [
        {"on": "left", "ux": 0, "uy": 0},
        {"name": "jack", "on": "right", "ux": 0.1, "case": "jacked"},
    ]
    for number, cases in enumerate((["jacked"], ["jacked", "idle"], ["idle", "jacked"])):
        document = job(FORCES[0], supports=supports)
        document["load_cases"] = {
            name: [{"on": "high", "total_force": [0, -10.0]}] for name in cases
        }
        together = solve(tmp_path / f"shared {number}", document, shared)
        assert together == solve(tmp_path / f"alone {number}", document)
        # jacked by 0.1 mm over 100 mm of length; the held end keeps it from contracting freely
        assert together["cases"]["jacked"]["displacement"]["value"] >= 0.1
    displacements = np.load(tmp_path / "shared 2" / "displacements.npy")
    assert np.abs(displacements[:, :, 0]).max() < 0.01 < np.abs(displacements[:, :, 1]).max()


# --- which jobs are of one model ------------------------------------------------------------------


def changed(kind: str, path: str, value: Any) -> dict[str, Any]:
    document = good(kind)
    document.get("meshing", {}).pop("target_error", None)
    document.get("meshing", {}).pop("max_dofs", None)
    document.get("requests", {}).pop("convergence", None)
    at: Any = document
    *steps, last = path.split("/")
    for step in steps:
        at = at[int(step) if isinstance(at, list) else step]
    at[int(last) if isinstance(at, list) else last] = value
    return document


def hashed(document: dict[str, Any]) -> str | None:
    return model_hash(load(document))


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize(
    ("path", "value"),
    [("title", "another"), ("label", "another batch"), ("limits", {"displacement": 3}),
     ("requests", {"fields": "all"})],
)  # fmt: skip
def test_loads_requests_and_names_are_no_part_of_the_model(
    kind: str, path: str, value: Any
) -> None:
    one = hashed(changed(kind, "title", "one"))
    assert one is not None
    assert hashed(changed(kind, path, value)) == one
    more = changed(kind, "title", "one")
    more["load_cases"] = {
        **more["load_cases"],
        "another": more["load_cases"][next(iter(more["load_cases"]))],
    }
    assert hashed(more) == one


@pytest.mark.parametrize(
    ("kind", "path", "value"),
    [
        ("outline", "units/force", "kN"),
        ("outline", "materials/steel/poissons_ratio", 0.31),
        ("outline", "geometry/outline/3/at", [0, 91]),
        ("outline", "geometry/holes/0/circle/radius", 25.5),
        ("outline", "plate/thickness", 16),
        ("outline", "meshing/size", 5),
        ("outline", "supports/2/spring/tangential", 4),
        ("outline", "supports/3/displacement", 0.6),
        ("patches", "geometry/patches/0/divisions", [9, 4]),
        ("patches", "meshing/element", "T3"),
        ("mesh", "geometry/mesh/nodes/5", [2, 1.25]),
        ("mesh", "geometry/mesh/blocks/1/connectivity", [[6, 5, 2]]),
        ("mesh", "geometry/mesh/blocks/0/region", "other"),
        ("mesh", "geometry/mesh/sides/low", [[0, 1]]),
        ("mesh", "geometry/mesh/points/nose", 5),
        ("mesh", "geometry/regions/0/thickness", 9),
    ],
)
def test_whatever_the_stiffness_depends_on_is(kind: str, path: str, value: Any) -> None:
    document = changed(kind, path, value)
    if value == "other":
        document["geometry"]["regions"] = [{"name": "other", "thickness": "8 mm"}]
    assert hashed(document) != hashed(changed(kind, "title", "one"))


def test_long_meshes_that_differ_in_the_middle_differ() -> None:
    """The text of a long array leaves out its middle (numpy.set_printoptions: threshold)."""
    nodes = [[x, y] for y in (0.0, 1.0) for x in range(2000)]
    cells = [[x, x + 1, x + 2001, x + 2000] for x in range(1999)]
    document = good("mesh")
    document["geometry"] = {
        "mesh": {"nodes": nodes, "blocks": [{"element": "Q4", "connectivity": cells}]}
    }
    document["supports"] = [{"on": {"nodes": [0, 2000]}, "ux": 0, "uy": 0}]
    document["load_cases"] = {"a": [{"acceleration": [0, -9.81]}]}
    document["materials"]["steel"]["density"] = 7.85
    first = hashed(document)
    moved = copy.deepcopy(document)
    moved["geometry"]["mesh"]["nodes"][1000] = [1000.25, 0.0]
    assert hashed(moved) != first
    turned = copy.deepcopy(document)
    turned["geometry"]["mesh"]["blocks"][0]["connectivity"][1000] = [1001, 3001, 3000, 1000]
    assert hashed(turned) != first


@pytest.mark.parametrize(
    ("part", "value"), [("meshing", {"target_error": 0.05}), ("requests", {"convergence": True})]
)
def test_a_mesh_that_follows_the_loads_is_nobodys_model(part: str, value: dict[str, Any]) -> None:
    document = good("outline")
    document["meshing"], document["requests"] = {"element": "Q8"}, {}
    assert hashed(document) is not None
    document[part] = value
    assert hashed(document) is None
