"""Measures, peaks and the envelope of many states."""

import numpy as np
import pytest

from tests.exact_solutions import kirsch, solve_with_exact_border
from tests.plates import ELEMENTS, grid, plate_job, warp
from workers.analysis.envelope import WORST, Envelope, measures
from workers.analysis.error_estimate import error_stress, estimate_error
from workers.analysis.field_mesh import FieldMesh
from workers.analysis.model import build_model
from workers.analysis.peaks import SAFETY, Peak, find_peaks, find_utilisation
from workers.analysis.recovery import Recovery, Temperature

E, NU = 1000.0, 0.3


def test_measures_of_pure_shear_by_hand() -> None:
    """tau = 50: principal +-50, von Mises 50 sqrt 3, shear 50; displacement 3-4-5."""
    stress = np.array([[[0.0], [0.0], [50.0]]])
    found = measures(np.array([[[3.0], [4.0]]]), stress)
    expected = {
        "von_mises": 50 * np.sqrt(3),
        "principal_max": 50.0,
        "principal_min": -50.0,
        "shear_max": 50.0,
        "displacement": 5.0,
    }
    assert {name: pytest.approx(v[0, 0]) for name, v in found.items()} == expected


def test_envelope_by_chunks_is_the_worst_of_all_states_at_once() -> None:
    rng = np.random.default_rng(8)
    values = {name: rng.normal(size=(30, 9)) for name in WORST}
    envelope = Envelope()
    for columns in (range(0, 4), range(4, 5), range(5, 9)):
        envelope.include(columns, {name: v[:, columns] for name, v in values.items()})
    for name, sign in WORST.items():
        worst = values[name].max(axis=1) if sign > 0 else values[name].min(axis=1)
        assert (envelope.value[name] == worst).all()
        governing = values[name][np.arange(30), envelope.state[name]]
        assert (governing == worst).all()


def test_envelope_does_not_keep_the_states_alive() -> None:
    values = {name: np.ones((3, 2)) for name in WORST}
    envelope = Envelope()
    envelope.include(range(2), values)
    values["von_mises"][:] = 5
    assert (envelope.value["von_mises"] == 1).all()


# --- peaks ---------------------------------------------------------------------------------------


def _hole(kind: str, cells: int) -> Recovery:
    def shape(x: np.ndarray, y: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        r, t = 1 + 3 * (np.exp(1.5 * x) - 1) / (np.exp(1.5) - 1), np.pi / 2 * y
        return r * np.cos(t), r * np.sin(t)

    job = plate_job(youngs_modulus=E, poissons_ratio=NU)
    return Recovery.build(build_model(job, grid(kind, cells, cells, shape=shape)))


def _peaks(recovery: Recovery, u: np.ndarray, heat: Temperature = None) -> dict[str, Peak]:
    stress = recovery.nodal_stress(u, heat)
    error = error_stress(recovery.model, estimate_error(recovery, u, stress, heat))
    values = measures(u[recovery.field_mesh.origin], stress)
    return find_peaks(recovery.field_mesh, values, error)


@pytest.mark.parametrize("kind", ELEMENTS)
@pytest.mark.parametrize("cells", [4, 8, 16])
def test_error_of_the_peak_covers_the_true_error(kind: str, cells: int) -> None:
    """Kirsch: the peak at the hole is 3; the estimate must not be smaller than what is missing."""
    recovery = _hole(kind, cells)
    peaks = _peaks(recovery, solve_with_exact_border(recovery.model, kirsch(E, NU)))
    for name in ("von_mises", "principal_max"):
        value, error = peaks[name].value[0], peaks[name].error[0]  # type: ignore[index]
        print(f"{kind} {cells}: {name} {value:.3f} +- {error:.3f}, exact 3")
        assert abs(value - 3) <= error


@pytest.mark.parametrize("kind", ELEMENTS)
def test_error_of_the_peak_shrinks_with_the_elements(kind: str) -> None:
    """To a quarter of the size; the raw stress of T3 and Q4 converges with its first power, so
    to less than half of the error."""
    errors = []
    for cells in (6, 24):
        recovery = _hole(kind, cells)
        peaks = _peaks(recovery, solve_with_exact_border(recovery.model, kirsch(E, NU)))
        errors.append(peaks["von_mises"].error[0])  # type: ignore[index]
    assert errors[1] < errors[0] / 2


def test_error_of_a_peak_is_that_of_the_worst_element_around_it() -> None:
    """Point 4 is the middle of 2 x 2 squares; the two states peak there and in a corner."""
    field_mesh = FieldMesh.build(grid("Q4", 2, 2))
    values = {name: np.zeros((9, 2)) for name in WORST}
    middle = int(np.linalg.norm(field_mesh.points - 0.5, axis=1).argmin())
    values["von_mises"][middle, 0] = values["von_mises"][0, 1] = 10.0
    error = np.array([[1.0, 5.0], [2.0, 6.0], [3.0, 7.0], [4.0, 8.0]])
    only = int(np.flatnonzero((field_mesh.connectivity[0] == 0).any(axis=1))[0])
    found = find_peaks(field_mesh, values, (error,))["von_mises"]
    assert found.error is not None
    assert found.error.tolist() == [SAFETY * 4.0, SAFETY * error[only, 1]]


def test_peaks_of_several_states_are_those_of_each_alone() -> None:
    recovery = Recovery.build(build_model(plate_job(), grid("T6+Q8", 6, 4, shape=warp)))
    u = np.random.default_rng(2).random((recovery.model.mesh.node_count, 2, 4))
    heat = tuple(np.full((b.element_count, 4), 10.0) for b in recovery.model.mesh.blocks)
    together = _peaks(recovery, u, heat)
    for k in range(4):
        one = slice(k, k + 1)
        for name, peak in _peaks(recovery, u[:, :, one], tuple(t[:, one] for t in heat)).items():
            assert peak.value[0] == pytest.approx(together[name].value[k], rel=1e-12)
            assert peak.point[0] == together[name].point[k]
            if peak.error is not None:
                assert peak.error[0] == pytest.approx(together[name].error[k])  # type: ignore[index]


def test_uniform_stress_has_a_peak_without_error() -> None:
    recovery = Recovery.build(build_model(plate_job(), grid("Q8", 3, 3, shape=warp)))
    u = np.zeros((recovery.model.mesh.node_count, 2, 1))
    u[:, 0, 0] = 1e-3 * recovery.model.mesh.nodes[:, 0]
    peak = _peaks(recovery, u)["von_mises"]
    assert peak.error[0] < 1e-8 * peak.value[0]  # type: ignore[index]


def test_utilisation_takes_the_strength_of_each_point() -> None:
    """200 of 400 is half; 150 of 200 is three quarters and governs; no strength, no say."""
    found = find_utilisation(
        np.array([[200.0], [150.0], [900.0]]), np.array([400.0, 200.0, np.nan])
    )
    assert found is not None
    assert (found.value.tolist(), found.point.tolist()) == ([0.75], [1])


def test_no_strength_no_utilisation() -> None:
    assert find_utilisation(np.ones((2, 1)), np.full(2, np.nan)) is None
