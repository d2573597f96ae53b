"""The interval of the peak stress, on plates whose peak has a closed form.

Sources stand beside the plates in tests/known_peaks.py and tests/exact_solutions.py.
"""

import numpy as np
import pytest

from tests.known_peaks import KnownPeak, inglis, known_peaks
from workers.analysis.envelope import measures
from workers.analysis.error_estimate import error_stress, estimate_error
from workers.analysis.peak_interval import peak_intervals
from workers.analysis.peaks import find_peaks

LEAST = 18  # of twenty: what an interval that is to be relied upon must do
NARROW = 0.33  # of the peak: an interval as wide as that tells nothing (T3 and Q4 apart)


def found(plate: KnownPeak) -> tuple[float, tuple[float, float]]:
    """Recovered peak of von Mises and its interval, as the summary makes them."""
    recovery, u = plate.recovery, plate.displacement
    stress = recovery.nodal_stress(u)
    values = measures(u[recovery.field_mesh.origin], stress)
    errors = error_stress(recovery.model, estimate_error(recovery, u, stress))
    peaks = find_peaks(recovery.field_mesh, values, errors)
    low, high = peak_intervals(recovery, peaks, values, u, None)["von_mises"][0]
    return float(peaks["von_mises"].value[0]), (float(low), float(high))


def test_intervals_contain_the_exact_peak_on_at_least_18_of_20_plates() -> None:
    held, widths = [], {}
    print("\nplate                         exact     found   interval            width  holds")
    for plate in known_peaks():
        value, (low, high) = found(plate)
        held.append(low <= plate.peak <= high)
        widths[plate.name] = (high - low) / plate.peak
        print(
            f"{plate.name:28} {plate.peak:8.4f}  {value:8.4f}  [{low:8.4f}, {high:8.4f}]"
            f"  {widths[plate.name]:5.1%}  {'yes' if held[-1] else 'no'}"
        )
    print(f"{sum(held)} of {len(held)}")
    assert len(held) == 20
    assert sum(held) >= LEAST
    quadratic = [width for name, width in widths.items() if name[:2] in ("T6", "Q8")]
    assert np.median(quadratic) < NARROW / 3
    assert max(quadratic) < NARROW


def test_the_closed_form_of_the_ellipse_satisfies_its_conditions() -> None:
    """Inglis 1913: 1 + 2 a / b at the end of the axis across the pull; the edge is free; far away
    there is nothing but the pull.
    """
    a, b = 3.0, 1.0
    exact = inglis(a, b)
    t = np.linspace(0.01, np.pi / 2 - 0.01, 50)
    x, y = a * np.cos(t), b * np.sin(t)
    xx, yy, xy = exact.stress(x, y).T
    nx, ny = np.array([b * np.cos(t), a * np.sin(t)]) / np.hypot(b * np.cos(t), a * np.sin(t))
    np.testing.assert_allclose([xx * nx + xy * ny, xy * nx + yy * ny], 0, atol=1e-9)
    assert exact.stress(np.array([a]), np.array([0.0]))[0, 1] == pytest.approx(7.0, rel=1e-12)
    far = exact.stress(np.array([1e5]), np.array([2e5]))[0]
    np.testing.assert_allclose(far, [0, 1, 0], atol=1e-8)
