"""A beam on elastic line springs, given by its outline: Hetenyi, Beams on Elastic Foundation, 1946.

E I w'''' + k w = 0 away from the load; its general solution (ch. 1) with the four conditions of a
free-ended beam with a force in its middle is solved here as a system, not copied.
"""

import numpy as np
import pytest

from tests.gallery import rectangle
from tests.outlines import STEEL, Json, document, solved
from workers.analysis.cuts import cut_forces

E = STEEL["youngs_modulus"]
LENGTH, HEIGHT, T, FORCE = 800.0, 10.0, 2.0, 100.0
EI = E * T * HEIGHT**3 / 12
LAMBDA = 1 / 120.0  # 1 over the characteristic length: the beam is twelve of its height
SPRING = 4 * EI * LAMBDA**4  # force per length per length of the base


def _beam(x: np.ndarray | float, derivative: int = 0) -> np.ndarray:
    """Deflection, or a derivative of it, at x >= 0 from the middle; the force acts upwards."""
    half = LENGTH / 2

    def terms(at: float, order: int) -> list[float]:
        """exp(+-a x) times cos and sin, differentiated: real and imaginary parts."""
        found = []
        for root in (LAMBDA * (1 + 1j), LAMBDA * (-1 + 1j)):
            value = root**order * np.exp(root * at)
            found += [value.real, value.imag]
        return found

    conditions = [terms(0.0, 1), terms(0.0, 3), terms(half, 2), terms(half, 3)]
    # No slope in the middle, E I w''' = F/2 right of it; no moment and no shear at the end.
    scale = [LAMBDA, LAMBDA**3, LAMBDA**2, LAMBDA**3]
    right = np.array([0.0, FORCE / (2 * EI), 0.0, 0.0])
    c = np.linalg.solve(np.array(conditions) / np.array(scale)[:, None], right / scale)
    return np.array([np.dot(terms(float(at), derivative), c) for at in np.atleast_1d(x)])


def test_the_beam_that_is_compared_with_balances_its_springs() -> None:
    """The springs' force is the load, and far from the ends w is that of an infinite beam,
    F lambda / (2 k): Hetenyi, eq. (4)."""
    s, w = np.polynomial.legendre.leggauss(40)
    x = LENGTH / 4 * (1 + s)
    assert 2 * SPRING * (_beam(x) @ w) * LENGTH / 4 == pytest.approx(FORCE, rel=1e-10)
    infinite = FORCE * LAMBDA / (2 * SPRING)
    assert _beam(0.0)[0] == pytest.approx(infinite, rel=0.01)
    assert -EI * _beam(0.0, 2)[0] == pytest.approx(FORCE / (4 * LAMBDA), rel=0.05)


@pytest.mark.parametrize(
    ("element", "size", "tolerance"),
    [("T3", 1.0, 0.03), ("Q4", 1.0, 0.01), ("T6", 5.0, 5e-3), ("Q8", 5.0, 5e-3)],
)
def test_beam_on_elastic_line_springs(element: str, size: float, tolerance: float) -> None:
    """Deflection at seven places to half a percent of the largest, bending moment on cuts.

    The plate has the shear deformation that the beam theory leaves out: of the order of
    (lambda h)^2 = 0.7 %, half of it under the load. T3 and Q4 are stiff in bending.
    """
    outline = rectangle(-LENGTH / 2, 0, LENGTH, HEIGHT)
    outline[0]["side"] = "base"
    xs = np.array([-400.0, -240.0, -120.0, -60.0, 60.0, 120.0, 240.0])
    points = {f"p{i}": [x, 0.0] for i, x in enumerate(xs)} | {"top": [0.0, HEIGHT]}
    cuts: Json = {
        f"c{i}": {"from": [x, 0], "to": [x, HEIGHT]} for i, x in enumerate((35.0, 101.0, 207.0))
    }
    plate = solved(
        document(
            {"outline": outline, "points": points},
            [{"on": "base", "spring": {"y": SPRING}}, {"on": "p0", "ux": 0}],
            [{"on": "top", "force": [0, FORCE]}],
            element=element, size=size, thickness=T, requests={"cuts": cuts},
        )
    )  # fmt: skip
    largest = _beam(0.0)[0]
    found = np.array([plate.displacement[plate.mesh.points[f"p{i}"], 1] for i in range(len(xs))])
    off = (found - _beam(np.abs(xs))) / largest
    print(f"{element}: deflection off by {100 * np.abs(off).max():.2f} % of {largest:.5f}")
    assert np.abs(off).max() < tolerance
    most = FORCE / (4 * LAMBDA)
    for cut in plate.job.requests.cuts.values():
        moment = cut_forces(plate.solution, cut).moment[0]
        expected = EI * _beam(cut.start[0], 2)[0]
        print(f"{element}: moment at {cut.start[0]:g}: {moment:.2f} (beam {expected:.2f})")
        assert moment == pytest.approx(expected, abs=tolerance * most)
    total = plate.reaction("base")[1]
    assert total == pytest.approx(-FORCE, rel=1e-8)
