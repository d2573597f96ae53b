"""Rules about infinite stress and peaks that do not settle, on results written by hand."""

from typing import Any

import pytest

from tests.reviewed import raised, sound_results, sound_state

VALUE = 120.0
CORNER = {
    "value": 300.0, "at": [0.0, 0.0], "kind": "fixed-end", "exponent": 0.76, "radius": 2.5,
    "element_size": 1.0, "confirmed": True,
}  # fmt: skip


def refined(
    entry: dict[str, Any], *, reached: float = 0.02, half_interval: float = 5.0, **peak: Any
) -> dict[str, Any]:
    """Results of an adaptive run to 2 %; entry : what the series says of the peak."""
    record = {
        "value": VALUE, "at": [30.0, 50.0], "error": 2.0, "singular": None,
        "interval": [VALUE - half_interval, VALUE + half_interval], **peak,
    }  # fmt: skip
    results = sound_results({"pull": sound_state(von_mises=record)})
    return results | {
        "convergence": {
            "target_error": 0.02, "stopped_by": "steps", "message": "no more meshes",
            "meshes": [{"relative_error": reached, "case": "pull"}],
            "peaks": {"pull": {"von_mises": {"values": [90.0, 110.0, VALUE], **entry}}},
        }
    }  # fmt: skip


def series(behaviour: str, uncertainty: float | None) -> dict[str, Any]:
    return {"behaviour": behaviour, "uncertainty": uncertainty}


@pytest.mark.parametrize(
    ("entry", "half_interval"),
    [
        (series("oscillating", 12.1), 1.0),  # over a tenth of 120
        (series("unresolved", 12.1), 1.0),
        (series("converging", 15.0), 12.1),
    ],
)
def test_a_peak_that_has_not_settled_is_told(entry: dict[str, Any], half_interval: float) -> None:
    (caution,) = raised(results=refined(entry, half_interval=half_interval))["not-converged"]
    assert caution.evidence["value"] == pytest.approx(12.1)
    assert caution.evidence["limit"] == pytest.approx(12.0)


@pytest.mark.parametrize(
    ("entry", "half_interval"),
    [
        (series("oscillating", 11.9), 20.0),
        (series("converging", 15.0), 11.9),  # the interval that is reported knows of the series
        (series("converging", 11.9), 20.0),
        (series("growing", None), 20.0),  # a rule of its own
    ],
)
def test_a_peak_that_has_settled_is_not_told(entry: dict[str, Any], half_interval: float) -> None:
    assert "not-converged" not in raised(results=refined(entry, half_interval=half_interval))


def test_a_target_that_was_not_reached_is_told_with_what_stopped_the_run() -> None:
    settled = series("converging", 1.0)
    (caution,) = raised(results=refined(settled, reached=0.021))["not-converged"]
    assert "no more meshes" in caution.message
    assert caution.evidence["stopped_by"] == "steps"
    assert "not-converged" not in raised(results=refined(settled, reached=0.0199))


def test_a_peak_elsewhere_that_grows_without_end_is_told() -> None:
    (caution,) = raised(results=refined(series("growing", None)))["stress-singularity"]
    assert caution.evidence["kind"] == "unknown"


def test_what_is_infinite_is_told_with_both_values() -> None:
    results = refined(series("converging", 1.0), singular=CORNER)
    (caution,) = raised(results=results)["stress-singularity"]
    assert (caution.evidence["value"], caution.evidence["outside"]) == (300.0, VALUE)
    assert "as the theory says" in caution.message


def test_other_rules_do_not_call_what_is_left_out_the_peak() -> None:
    """The corner lies on the fixed side of the plate."""
    results = refined(series("converging", 1.0), singular=CORNER)
    (caution,) = raised(results=results)["over-restrained"]
    assert "300 MPa (left out of the reported peak, 120 MPa)" in caution.message
