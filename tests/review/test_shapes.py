"""Corners of the drawing that elements fit into only badly."""

import pytest

from tests.gallery import GALLERY, drawn, loop, rectangle
from tests.reviewed import raised, sound_job


def codes_for(**geometry: object) -> dict:
    found = raised(sound_job(geometry=drawn(geometry)))
    return {code: cautions for code, cautions in found.items() if code == "sharp-corner"}


def test_the_sharpest_corner_is_named_with_its_place() -> None:
    """A toe of 20 degrees: 109.19 / 300 is its tangent."""
    (caution,) = raised(sound_job(geometry=drawn(GALLERY["wedge"])))["sharp-corner"]
    assert caution.evidence["value"] == pytest.approx(20, abs=1e-3)
    assert caution.evidence["at"] == [0, 0]
    assert caution.evidence["corners"] == 1


def test_a_region_that_ends_in_a_sharp_corner_is_told_too() -> None:
    """A strip's diagonal leaves atan(20 / 200) = 5.7 degrees in both its parts."""
    strip = [{"name": "part", "thickness": 3, "outline": loop((0, 0), (200, 0), (200, 20))}]
    (caution,) = codes_for(outline=rectangle(0, 0, 200, 20), regions=strip)["sharp-corner"]
    assert caution.evidence["value"] == pytest.approx(5.71, abs=0.01)
    assert caution.evidence["corners"] == 2


@pytest.mark.parametrize(
    "outline",
    [
        loop((0, 0), (200, 0), (200, 118)),  # 30.5 degrees
        loop((0, 0), (100, 0), (100, 50), (55, 50), (50, 20), (45, 50), (0, 50)),  # a notch: void
    ],
)
def test_blunter_corners_and_notches_are_silent(outline: list) -> None:
    assert codes_for(outline=outline) == {}


def test_patches_have_no_drawing() -> None:
    assert raised(sound_job()) == {}
