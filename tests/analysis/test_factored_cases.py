"""Cases made of factors give what the same cases spelled out give, and what the bar gives by hand.

Loads of every kind are scaled by the factor, in either direction; only patterns are solved.
"""

from typing import Any

import pytest

from tests.job_documents import strip
from workers.analysis.combine import load_states
from workers.analysis.meshing.build import mesh_job
from workers.analysis.recovery import Recovery
from workers.analysis.solution import Solution, solve
from workers.analysis.summary import summarise
from workers.document.read import load

LENGTH, HEIGHT, THICKNESS, E = 100.0, 40.0, 8.0, 210_000.0
PROBE = {"probes": {"middle": [50, 20]}, "cuts": {"half": {"from": [50, 0], "to": [50, 40]}}}

# Sums of square roots of rounding: far above 1e-16 and far below any mistake in a factor.
SAME = 1e-11


def solved(document: dict[str, Any]) -> tuple[Solution, dict[str, Any]]:
    job = load(document)
    solution = solve(job, mesh_job(job))
    recovery = Recovery.build(solution.model)
    return solution, summarise(solution, recovery, load_states(job))


def bar(**parts: Any) -> dict[str, Any]:
    document = {**strip(), "requests": PROBE, **parts}
    document["materials"]["steel"]["thermal_expansion"] = 1.2e-5
    return document


PATTERNS = {
    "pull": [{"on": "right", "total_force": [1000, 0]}],
    "push down": [{"on": "right", "total_force": [0, -100]}, {"on": "high", "pressure": 0.5}],
    "weight": [{"acceleration": [0, -9810]}],
    "spin": [{"spin": {"about": [0, 0], "speed": 10}}],
    "sun": [{"temperature_change": 20}],
    "settled": [],
}
SETTLED = {"on": "corner", "uy": 0.01, "case": "settled"}
SUPPORTS = [{"on": "left", "ux": 0}, {"on": {"segment": [[100, 0], [100, 40]]}, "uy": 0}, SETTLED]


def test_a_bar_pulled_by_factors_has_its_stress_by_hand() -> None:
    """Pattern 1000 N over 320 mm2; factor 32 makes 100 MPa, -16 makes 50 MPa of compression."""
    cases = {"taut": {"pull": 32}, "slack": {"pull": -16}}
    solution, results = solved(bar(load_cases={"pull": PATTERNS["pull"]}, cases=cases))
    assert list(results["cases"]) == ["taut", "slack"]
    assert solution.displacement.shape[2] == 1  # the pattern alone is solved
    taut, slack = results["cases"].values()
    assert taut["von_mises"]["value"] == pytest.approx(100.0, rel=1e-9)
    assert slack["principal_min"]["value"] == pytest.approx(-50.0, rel=1e-9)
    assert taut["reactions"]["left"]["force"][0] == pytest.approx(-32_000.0, rel=1e-9)
    assert slack["equilibrium"]["applied"][0] == pytest.approx(-16_000.0, rel=1e-9)
    assert taut["equilibrium"]["residual"] < 1e-9
    assert results["envelope"]["von_mises"]["governs"] == "taut"
    assert results["cuts"]["half"]["slack"]["normal"] == pytest.approx(-16_000.0, rel=1e-9)


def test_factored_cases_are_the_combinations_of_the_same_factors() -> None:
    """All kinds of load, a settlement among them; one state stays one of each pattern alone."""
    factors: dict[str, dict[str, float]] = {
        "storm": {"pull": 3.0, "push down": -2.0, "weight": 1.35, "spin": 0.5},
        "calm": {"weight": 1.0, "sun": -1.0, "settled": 2.0},
        "turned back": {"spin": -1.5, "sun": 0.3},
    }
    base = {"load_cases": PATTERNS, "supports": SUPPORTS}
    _, factored = solved(bar(**base, cases=factors))
    _, combined = solved(bar(**base, combinations=factors))
    assert list(factored["cases"]) == list(factors)
    assert factored["combinations"] == {}
    for name in factors:
        one, other = factored["cases"][name], combined["combinations"][name]
        for measure in ("von_mises", "principal_max", "principal_min", "displacement"):
            assert one[measure]["value"] == pytest.approx(other[measure]["value"], rel=SAME)
        assert one["error_estimate"] == pytest.approx(other["error_estimate"], rel=1e-9)
        assert factored["probes"]["middle"][name]["stress"] == pytest.approx(
            combined["probes"]["middle"][name]["stress"], rel=SAME
        )


def test_factored_cases_are_those_spelled_out() -> None:
    """The same loads written into the cases by hand: each a right-hand side of its own."""
    cases = {"a": {"pull": 2.0, "push down": 0.5}, "b": {"push down": -1.0}}
    spelled = {
        "a": [
            {"on": "right", "total_force": [2000, 0]},
            {"on": "right", "total_force": [0, -50]},
            {"on": "high", "pressure": 0.25},
        ],
        "b": [{"on": "right", "total_force": [0, 100]}, {"on": "high", "pressure": -0.5}],
    }
    patterns = {name: PATTERNS[name] for name in ("pull", "push down")}
    more = {"both": {"a": 1.5, "b": -3.0}}
    _, factored = solved(bar(load_cases=patterns, cases=cases, combinations=more))
    _, plain = solved(bar(load_cases=spelled, combinations=more))
    for kind, name in (("cases", "a"), ("cases", "b"), ("combinations", "both")):
        one, other = factored[kind][name], plain[kind][name]
        assert one["von_mises"]["value"] == pytest.approx(other["von_mises"]["value"], rel=SAME)
        assert one["equilibrium"]["applied"] == pytest.approx(
            other["equilibrium"]["applied"], rel=SAME, abs=1e-6
        )
