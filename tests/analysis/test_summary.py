"""The summary: figures by hand, plain numbers only, faults of requests together."""

import math
from dataclasses import replace
from typing import Any

import numpy as np
import pytest

import workers.analysis.summary as summary_module
from tests.plates import grid, plate_job
from workers.analysis.combine import load_states
from workers.analysis.envelope import Envelope
from workers.analysis.fields import displacement_fields, state_fields
from workers.analysis.recovery import Recovery
from workers.analysis.solution import solve
from workers.analysis.summary import mesh_figures, summarise
from workers.errors import MeshError
from workers.geometry import Region
from workers.job import (
    Combination,
    Cut,
    Line,
    Named,
    Requests,
    Support,
    TemperatureChange,
    Traction,
)

# A bar 4 x 1 x 2 on rollers at its left end: every stress is uniform, every figure a hand sum.
SUPPORTS = [Support("wall", Named("left"), ux=0.0), Support("pin", Named("SW"), uy=0.0)]
PULL = [Traction(on=Named("right"), start=(100.0, 0.0), end=(100.0, 0.0))]
REQUESTS = Requests(
    probes={"middle": (2.0, 0.5)},
    lines={"axis": Line((0.0, 0.5), (4.0, 0.5), 5)},
    cuts={"half": Cut((2.0, 1.0), (2.0, 0.0))},
)
E, NU, ALPHA = 210e3, 0.3, 1.2e-5


def _bar(**changes: Any):
    job = plate_job(
        SUPPORTS,
        {"pull": PULL, "heat": [TemperatureChange(change=50.0)]},
        combinations=(Combination("both", {"pull": -2.0, "heat": 1.0}),),
    )
    solution = solve(replace(job, requests=REQUESTS, **changes), grid("Q8", 4, 1, size=(4.0, 1.0)))
    return solution, Recovery.build(solution.model), load_states(solution.model.job)


@pytest.fixture(scope="module")
def bar():
    return _bar()


@pytest.fixture(scope="module")
def results(bar) -> dict[str, Any]:
    return summarise(*bar)


def test_uniform_pull_by_hand(results: dict[str, Any]) -> None:
    """100 on 1 x 2: von Mises 100, sliding 50, u = 100/E * 4, v = -nu 100/E * 1 at the tip."""
    pull = results["cases"]["pull"]
    for name, value in (("von_mises", 100), ("principal_max", 100), ("shear_max", 50)):
        assert pull[name]["value"] == pytest.approx(value, rel=1e-9)
        assert pull[name]["error"] < 1e-6
    assert pull["principal_min"]["value"] == pytest.approx(0, abs=1e-7)
    assert pull["displacement"]["value"] == pytest.approx(100 / E * np.hypot(4, NU), rel=1e-9)
    assert pull["displacement"]["at"] == [4.0, 1.0]
    assert pull["utilisation"]["value"] == pytest.approx(100 / 355, rel=1e-9)
    assert pull["utilisation"]["yield_strength"] == 355.0


def test_reactions_and_equilibrium_by_hand(results: dict[str, Any]) -> None:
    pull = results["cases"]["pull"]
    np.testing.assert_allclose(pull["reactions"]["wall"]["force"], [-200, 0], atol=1e-8)
    assert pull["reactions"]["wall"]["about"] == [0.0, 0.5]
    np.testing.assert_allclose(pull["equilibrium"]["applied"], [200, 0, 0], atol=1e-9)
    np.testing.assert_allclose(pull["equilibrium"]["reaction"], [-200, 0, 0], atol=1e-7)
    assert pull["equilibrium"]["residual"] < 1e-9


def test_combination_superposes_before_von_mises(results: dict[str, Any]) -> None:
    """-2 x pull + heat: compression of 200, von Mises positive; u = (-200/E + alpha 50) 4."""
    both = results["combinations"]["both"]
    assert both["von_mises"]["value"] == pytest.approx(200, rel=1e-9)
    assert both["principal_min"]["value"] == pytest.approx(-200, rel=1e-9)
    u = results["probes"]["middle"]["both"]["displacement"][0]
    assert u == pytest.approx((-200 / E + ALPHA * 50) * 2, rel=1e-9)


def test_heat_alone_raises_no_stress(results: dict[str, Any]) -> None:
    heat = results["cases"]["heat"]
    assert heat["von_mises"]["value"] < 1e-9 * E * ALPHA * 50
    assert heat["error_estimate"]["relative"] == 0
    assert heat["equilibrium"]["residual"] < 1e-9


def test_envelope_names_the_governing_state(results: dict[str, Any]) -> None:
    governs = {name: peak["governs"] for name, peak in results["envelope"].items()}
    assert governs["von_mises"] == governs["principal_min"] == governs["utilisation"] == "both"
    assert governs["principal_max"] == "pull"


def test_requests_by_hand(results: dict[str, Any]) -> None:
    probe = results["probes"]["middle"]["pull"]
    np.testing.assert_allclose(probe["stress"], [100, 0, 0], atol=1e-7)
    np.testing.assert_allclose(probe["principal"], [100, 0], atol=1e-7)
    line = results["lines"]["axis"]
    assert line["distance"] == [0, 1, 2, 3, 4]
    u = np.array(line["cases"]["pull"]["displacement"])[:, 0]
    np.testing.assert_allclose(u, 100 / E * np.arange(5), atol=1e-12)
    cut = results["cuts"]["half"]["both"]
    assert cut["normal"] == pytest.approx(-400, rel=1e-9)
    np.testing.assert_allclose([cut["shear"], cut["moment"]], 0, atol=1e-6)
    assert cut["about"] == [2.0, 0.5]


def test_everything_is_plain_json(results: dict[str, Any]) -> None:
    """Nothing of numpy, no NaN: any JSON writer takes it."""

    def walk(value: Any) -> None:
        if isinstance(value, dict):
            assert all(type(key) is str for key in value)
            for inner in value.values():
                walk(inner)
        elif isinstance(value, list):
            for inner in value:
                walk(inner)
        else:
            assert value is None or type(value) in (int, float, str, bool)
            assert not isinstance(value, float) or math.isfinite(value)

    walk(results)


def test_chunks_of_states_change_nothing(bar, results, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(summary_module, "CHUNK_BYTES", 1.0)
    fractions = []
    one_by_one = summarise(*bar, progress=lambda stage, fraction: fractions.append(fraction))
    assert fractions == pytest.approx([1 / 3, 2 / 3, 1])
    assert one_by_one["envelope"]["von_mises"]["governs"] == "both"
    for name in ("cases", "combinations"):
        for state, figures in results[name].items():
            for peak in ("von_mises", "principal_max", "displacement"):
                assert one_by_one[name][state][peak]["value"] == pytest.approx(
                    figures[peak]["value"], rel=1e-12, abs=1e-9
                )


def test_envelope_takes_in_every_state(bar, results: dict[str, Any]) -> None:
    envelope = Envelope()
    summarise(*bar, envelope=envelope)
    assert envelope.value["von_mises"].max() == results["envelope"]["von_mises"]["value"]
    assert set(envelope.state["von_mises"]) == {2}


def test_fields_hold_the_peaks_of_the_summary(bar, results: dict[str, Any]) -> None:
    solution, recovery, states = bar
    fields = state_fields(solution, recovery, states, "both")
    both = results["combinations"]["both"]
    assert fields.von_mises.max() == pytest.approx(both["von_mises"]["value"], rel=1e-12)
    assert fields.principal_min.min() == pytest.approx(both["principal_min"]["value"], rel=1e-12)
    np.testing.assert_allclose(fields.cell_stress[0][:, 0], -200, rtol=1e-9)
    np.testing.assert_allclose(fields.cell_error[0], 0, atol=1e-7)
    # -nu s / E + alpha dT through the thickness, by hand.
    np.testing.assert_allclose(fields.thickness_strain, NU * 200 / E + ALPHA * 50, rtol=1e-9)


def test_fields_from_stored_displacements_are_the_same(bar) -> None:
    solution, recovery, states = bar
    stored = displacement_fields(recovery, "pull", solution.displacement[:, :, :1])
    fresh = state_fields(solution, recovery, states, "pull")
    assert (stored.von_mises == fresh.von_mises).all()


def test_faults_of_all_requests_of_a_kind_come_together() -> None:
    cuts = {
        name: Cut((x, 1.0), (x, 0.4), f"/requests/cuts/{name}") for name, x in (("a", 1), ("b", 2))
    }
    with pytest.raises(MeshError) as error:
        summarise(*_bar_with(Requests(cuts=cuts)))
    assert [fault.pointer for fault in error.value.faults] == [
        "/requests/cuts/a",
        "/requests/cuts/b",
    ]
    with pytest.raises(MeshError) as error:
        summarise(*_bar_with(Requests(probes={"a/b": (9.0, 9.0)})))
    assert error.value.faults[0].pointer == "/requests/probes/a~1b"


def _bar_with(requests: Requests):
    job = replace(plate_job(SUPPORTS, PULL), requests=requests)
    solution = solve(job, grid("Q4", 4, 4, size=(4.0, 1.0)))
    return solution, Recovery.build(solution.model), load_states(job)


def test_mesh_figures_by_region() -> None:
    mesh = grid(
        "Q8", 4, 2, size=(4.0, 1.0), region_of_column=[0, 1, 1, 1], regions=("plate", "web")
    )
    job = plate_job(SUPPORTS, PULL, regions=(Region("web", thickness=0.5),))
    figures = mesh_figures(solve(job, mesh).model)
    assert figures["elements"] == {"Q8": 8}
    assert figures["nodes"] == 37
    assert figures["dofs"] == 74
    web, plate = figures["regions"]["web"], figures["regions"]["plate"]
    assert (web["thickness"], web["material"]) == (0.5, "steel")
    assert web["area"] == pytest.approx(3.0)
    assert plate["area"] == pytest.approx(1.0)
    assert figures["parts"] == 1
