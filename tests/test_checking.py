"""A check: what was understood against hand sums, all faults at once, and the files it leaves."""

import json
import math
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from tests.job_documents import hanging_bar, strip
from workers import checking, pipeline
from workers.errors import DocumentError, LimitError, MeshError
from workers.outputs import preview

STRIP = 100.0 * 40.0  # area of the strip, 8 thick, of steel with 7.85e-9 t/mm3
GRAVITY = 9810.0

drawing = pytest.mark.skipif(preview.probe() is not None, reason="this machine cannot draw")


def check(document: dict[str, Any], folder: Path, **options: Any) -> dict[str, Any]:
    return checking.check(json.dumps(document).encode(), folder, **{"pictures": 0, **options})


def bored_strip() -> dict[str, Any]:
    """The strip as an outline with a hole of radius 10 in its middle."""
    document = strip()
    document["geometry"] = {
        "outline": [
            {"at": [0, 0], "side": "low"}, {"at": [100, 0], "side": "right"},
            {"at": [100, 40], "side": "high"}, {"at": [0, 40], "side": "left"},
        ],
        "holes": [{"name": "eye", "circle": {"centre": [50, 20], "radius": 10}}],
        "points": {"corner": [0, 0]},
    }  # fmt: skip
    document["meshing"] = {"element": "Q8", "size": 8}
    return document


# --- what was understood -------------------------------------------------------------------------


def test_the_plate_has_its_size_area_and_mass(tmp_path: Path) -> None:
    """4000 mm2 x 8 mm x 7850 kg/m3 = 0.2512 kg."""
    plate = check(strip(), tmp_path)["plate"]
    assert (plate["from"], plate["to"], plate["size"]) == ([0, 0], [100, 40], [100, 40])
    assert plate["area"] == pytest.approx(STRIP)
    assert plate["centroid"] == pytest.approx([50, 20])
    assert plate["mass"] == {"value": pytest.approx(0.2512), "unit": "kg"}


def test_a_hole_takes_its_area_away(tmp_path: Path) -> None:
    """pi 10^2, to what parabolas miss of a circle."""
    found = check(bored_strip(), tmp_path)
    assert found["plate"]["area"] == pytest.approx(STRIP - math.pi * 100, rel=1e-4)
    assert found["mesh"]["nodes"] > 100


def test_mass_in_pounds_for_plates_in_inches(tmp_path: Path) -> None:
    """100 x 40 x 8 in3 of 490 lb/ft3: 32 000 / 1728 x 490 lb."""
    document = strip()
    document["units"] = {"length": "in", "force": "lbf"}
    document["materials"]["steel"]["density"] = "490 lb/ft3"
    mass = check(document, tmp_path)["plate"]["mass"]
    assert mass == {"value": pytest.approx(32_000 / 1728 * 490), "unit": "lb"}


def test_no_mass_without_density(tmp_path: Path) -> None:
    document = strip()
    del document["materials"]["steel"]["density"]
    assert check(document, tmp_path)["plate"]["mass"] is None


def test_supports_say_what_they_hold_and_where(tmp_path: Path) -> None:
    """The left side of 5 x 2 Q8 has 2 x 2 + 1 nodes on 40 mm."""
    document = strip()
    document["supports"][0]["ux"] = 0.5
    document["supports"].append({"on": "right", "spring": {"y": 3}, "name": "rail"})
    supports = check(document, tmp_path)["supports"]
    assert supports == {
        "left": {"on": "left", "holds": "ux = 0.5 mm", "nodes": 5, "length": pytest.approx(40)},
        "corner": {"on": "corner", "holds": "uy = 0", "nodes": 1, "length": 0},
        "rail": {
            "on": "right", "holds": "spring y 3 N/mm²", "nodes": 5, "length": pytest.approx(40),
        },
    }  # fmt: skip


def test_loads_add_up_about_the_centroid(tmp_path: Path) -> None:
    """Pull of 32 kN in the middle of the right side; on the upper side pressure that grows from 0
    to 2 MPa towards x = 0 over 100 mm x 8 mm: 800 N down at 100/3 mm, 50 - 100/3 left of the
    centroid."""
    document = strip()
    document["load_cases"]["press"] = [{"on": "high", "pressure": {"from": 0, "to": 2}}]
    document["combinations"] = {"both": {"pull": 2, "press": 1.5}}
    found = check(document, tmp_path)
    press = [0, -800, 800 * (50 - 100 / 3)]
    by_hand = {"pull": [32_000, 0, 0], "press": press}
    by_hand["both"] = [64_000, 1.5 * press[1], 1.5 * press[2]]
    for name, state in {**found["cases"], **found["combinations"]}.items():
        assert [*state["force"], state["moment"]] == pytest.approx(by_hand[name], abs=1e-6)
    assert found["cases"]["press"]["force"][0] == 0.0  # rounding is not shown
    assert found["combinations"]["both"]["factors"] == {"pull": 2, "press": 1.5}
    assert found["load_cases"]["press"]["loads"] == [
        {"on": "high", "load": "pressure from 0 to 2 MPa"}
    ]


def test_self_weight_is_mass_times_gravity(tmp_path: Path) -> None:
    found = check(hanging_bar(), tmp_path)
    mass = found["plate"]["mass"]["value"]
    assert found["cases"]["self weight"]["force"] == pytest.approx([0, -mass * GRAVITY * 1e-3])


def test_cases_given_as_factors_add_up_from_their_patterns(tmp_path: Path) -> None:
    document = strip()
    document["cases"] = {"slack": {"pull": 0.25}, "taut": {"pull": 3}}
    document["combinations"] = {"both": {"slack": 2, "taut": 1}}
    found = check(document, tmp_path)
    pulls = {name: case["force"][0] for name, case in found["cases"].items()}
    assert pulls == pytest.approx({"slack": 8_000, "taut": 96_000})
    assert found["combinations"]["both"]["force"][0] == pytest.approx(112_000)
    assert list(found["load_cases"]) == ["pull"]


def test_hundreds_of_cases_are_added_up_in_parts(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    document = strip()
    document["load_cases"] = {
        f"pull {n}": [{"on": "right", "total_force": [n, 2 * n]}] for n in range(1, 30)
    }
    monkeypatch.setattr("workers.understanding.AT_ONCE", 8 * 2 * 45 * 4)  # four cases at a time
    found = check(document, tmp_path)["cases"]
    forces = np.array([found[f"pull {n}"]["force"] for n in range(1, 30)])
    assert forces == pytest.approx(np.outer(np.arange(1, 30), [1, 2]))


# --- cost and cautions ---------------------------------------------------------------------------


def test_the_cost_is_of_this_very_mesh(tmp_path: Path) -> None:
    """Counted entries are those that the solver reports."""
    found = check(bored_strip(), tmp_path)
    (tmp_path / "solved").mkdir()
    document = json.dumps(bored_strip()).encode()
    solved = pipeline.run(document, tmp_path / "solved", pictures=0)
    estimate = found["estimate"]
    assert estimate["factor_counted"]
    assert estimate["factor_entries"] == solved["solver"]["factor_entries"]
    assert estimate["dofs"] == solved["solver"]["dofs"] == found["mesh"]["dofs"]
    assert found["mesh"] == solved["mesh"]


def test_a_large_mesh_is_estimated_by_formula(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(checking, "MOST_COUNTED", 10)
    estimate = check(strip(), tmp_path)["estimate"]
    assert not estimate["factor_counted"]
    assert estimate["memory"]["bytes"] == max(estimate["memory"]["by_stage"].values())
    seconds = sum(estimate["time"]["by_stage"].values())
    assert estimate["time"]["seconds"] == pytest.approx(seconds, abs=0.01)


@pytest.mark.parametrize(
    ("meshing", "dofs"), [({"target_error": 0.01}, 100_000), ({"max_dofs": 5000}, 5000)]
)
def test_a_job_that_refines_its_mesh_is_told_what_the_finest_may_cost(
    tmp_path: Path, meshing: dict[str, Any], dofs: int
) -> None:
    document = strip()
    document["meshing"] |= {"target_error": 0.01, **meshing}
    estimate = check(document, tmp_path, most_dofs=100_000)["estimate"]
    assert estimate["finest"]["dofs"] == dofs
    assert estimate["finest"]["bytes"] > estimate["memory"]["bytes"]
    assert estimate["finest"]["seconds"] > estimate["time"]["seconds"]
    assert check(strip(), tmp_path)["estimate"]["finest"] is None


def test_cautions_known_before_solving_come_first_and_the_standing_ones_last(
    tmp_path: Path,
) -> None:
    """Steel a million times too soft is noticed from the document alone."""
    document = strip()
    document["materials"]["steel"]["youngs_modulus"] = 0.21
    codes = [caution["code"] for caution in check(document, tmp_path)["cautions"]]
    assert len(codes) > 2
    assert codes[-2:] == ["linear-plane-stress", "engineer-review"]


# --- faults --------------------------------------------------------------------------------------


def test_faults_that_only_the_mesh_shows_are_all_said_at_once(tmp_path: Path) -> None:
    """A selector that catches nothing, a point force on a side, a bearing on what is no round hole,
    a probe in the hole."""
    document = bored_strip()
    document["supports"].append({"on": {"segment": [[0, 3], [50, 3]]}, "ux": 0})
    document["load_cases"]["pull"] += [
        {"on": {"segment": [[0, 0], [100, 0]]}, "force": [1, 0]},
        {"on": "high", "bearing": [1, 0]},
    ]
    document["requests"] = {"probes": {"nowhere": [50, 20]}}
    with pytest.raises((MeshError, DocumentError)) as error:
        check(document, tmp_path)
    pointers = [fault.pointer for fault in error.value.faults]
    assert len(pointers) == len(set(pointers))
    assert {pointer.removesuffix("/on") for pointer in pointers} >= {
        "/supports/2", "/load_cases/pull/1", "/load_cases/pull/2", "/requests/probes/nowhere",
    }  # fmt: skip


@pytest.mark.parametrize("document", [strip(), bored_strip()])
def test_a_plate_that_is_free_to_move_is_a_fault(document: dict[str, Any], tmp_path: Path) -> None:
    document["supports"] = [{"on": "left", "ux": 0}]
    with pytest.raises(MeshError, match="move"):
        check(document, tmp_path)


def test_a_mesh_beyond_the_limit_is_refused_before_anything_else(tmp_path: Path) -> None:
    """45 nodes have 90 unknowns."""
    check(strip(), tmp_path, most_dofs=90)
    with pytest.raises(LimitError, match="89"):
        check(strip(), tmp_path, most_dofs=89)


def test_contradicting_supports_are_a_fault(tmp_path: Path) -> None:
    document = strip()
    document["supports"].append({"on": "left", "ux": 1})
    with pytest.raises(MeshError, match="contradicts"):
        check(document, tmp_path)


# --- files ---------------------------------------------------------------------------------------


@drawing
def test_pictures_of_the_first_states_are_drawn_and_others_later(tmp_path: Path) -> None:
    document = strip()
    document["combinations"] = {"pull, twice": {"pull": 2}}
    found = check(document, tmp_path, pictures=1, keep_mesh=True)
    assert found["pictures"] == {"available": True}
    assert found["previews"] == {"pull": "previews/pull.png"}
    assert json.loads((tmp_path / "check.json").read_bytes()) == found
    later = tmp_path / "later"
    later.mkdir()
    as_bytes = json.dumps(document).encode()
    first = (tmp_path / "previews" / "pull.png").read_bytes()
    assert checking.draw(as_bytes, tmp_path, later, "pull").read_bytes() == first
    assert checking.draw(as_bytes, tmp_path, later, "pull, twice").read_bytes() != first
    with pytest.raises(KeyError):
        checking.draw(as_bytes, tmp_path, later, "push")


def test_a_machine_that_cannot_draw_says_so(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(preview, "probe", lambda: "no libEGL")
    found = check(strip(), tmp_path, pictures=3)
    assert found["pictures"] == {"available": False, "reason": "no libEGL"}
    assert found["previews"] == {}


def test_progress_is_told_by_stage(tmp_path: Path) -> None:
    stages: list[str] = []
    check(strip(), tmp_path, progress=lambda stage, _: stages.append(stage))
    assert stages[:3] == ["reading", "meshing", "reviewing"]
