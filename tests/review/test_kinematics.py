"""Displacements, rotations and strains against small-displacement theory.

The plate is 200 x 100 mm, its diagonal 223.6 mm, and 5 % of that 11.18 mm. Rotations and strains
come from real solutions with prescribed displacements, so they are known by geometry.
"""

import pytest

from tests.reviewed import raised, sound_job, sound_mesh, sound_results, sound_state, steel
from workers.analysis.solution import solve
from workers.job import Combination, Job, LoadCase, Named, Support


def moved_by(value: float) -> dict:
    return sound_results({"pull": sound_state(displacement={"value": value, "at": [200.0, 50.0]})})


JOB = sound_job(limits=sound_job().limits.__class__())
STRETCHED = (Support("left", Named("left"), ux=0.0, uy=0.0),)


@pytest.mark.parametrize("value", [11.2, 80.0])
def test_a_displacement_of_a_twentieth_of_the_plate_is_too_large(value: float) -> None:
    (caution,) = raised(JOB, moved_by(value))["large-displacement"]
    assert caution.evidence["quantity"] == "displacement"
    assert caution.evidence["limit"] == pytest.approx(11.18, rel=1e-3)
    assert caution.evidence["at"] == [200, 50]


@pytest.mark.parametrize("value", [11.1, 0.5])
def test_a_smaller_displacement_is_small(value: float) -> None:
    assert "large-displacement" not in raised(JOB, moved_by(value))


def quantities(job: Job, results: dict | None = None) -> dict[str, float]:
    solution = solve(job, sound_mesh())
    found = raised(job, results or sound_results(), solution=solution)
    return {c.evidence["quantity"]: c.evidence["value"] for c in found["large-displacement"]}


def turned(angle: float) -> Job:
    """A rigid rotation about the lower left corner, small-displacement style."""
    supports = (
        Support("pin", Named("SW"), ux=0.0, uy=0.0),
        Support("far corner", Named("SE"), uy=200.0 * angle),
    )
    return sound_job(supports=supports, load_cases=(LoadCase("pull", ()),))


@pytest.mark.parametrize("angle", [0.11, -0.5])
def test_a_rotation_of_more_than_a_tenth_is_too_large(angle: float) -> None:
    assert quantities(turned(angle))["rotation"] == pytest.approx(abs(angle), rel=1e-6)


@pytest.mark.parametrize("angle", [0.09, 0.01])
def test_a_rotation_of_less_than_a_tenth_is_small(angle: float) -> None:
    solution = solve(turned(angle), sound_mesh())
    assert "large-displacement" not in raised(turned(angle), solution=solution)


def stretched(strain: float) -> Job:
    """Uniform stretch along x, free across: the far side moves by 200 mm times the strain."""
    supports = (
        Support("left", Named("left"), ux=0.0),
        Support("corner", Named("SW"), uy=0.0),
        Support("right", Named("right"), ux=200.0 * strain),
    )
    return sound_job(
        supports=supports, load_cases=(LoadCase("pull", ()),), materials=steel(youngs_modulus=900.0,
        yield_strength=25.0, density=9.5e-10),
    )  # fmt: skip


@pytest.mark.parametrize("strain", [0.021, -0.04])
def test_a_strain_of_more_than_two_percent_is_too_large(strain: float) -> None:
    assert quantities(stretched(strain))["strain"] == pytest.approx(abs(strain), rel=1e-6)


@pytest.mark.parametrize("strain", [0.019, -0.001])
def test_a_smaller_strain_is_small(strain: float) -> None:
    solution = solve(stretched(strain), sound_mesh())
    assert "large-displacement" not in raised(stretched(strain), solution=solution)


def test_a_combination_is_superposed_before_it_is_judged() -> None:
    """Each case turns by 0.06 rad, which is small; their sum is not."""
    base = turned(0.06)
    job = sound_job(
        supports=base.supports,
        load_cases=(LoadCase("pull", ()), LoadCase("push", ())),
        combinations=(Combination("both", {"pull": 1.0, "push": 1.0}),),
    )
    large = sound_state(displacement={"value": 2.0, "at": [0.0, 0.0]})
    results = sound_results({"pull": sound_state(), "push": sound_state()}, {"both": large})
    assert quantities(job, results)["rotation"] == pytest.approx(0.12, rel=1e-6)
