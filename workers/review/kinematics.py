"""Rules about displacements, rotations and strains: are they small enough for linear theory?"""

from collections.abc import Iterator
from typing import NamedTuple

import numpy as np

from workers.review.context import ReviewContext
from workers.review.rule import Finding, finding, rule

# Loads and reactions keep the lever arms of the undeformed plate. Common practice.
DISPLACEMENT = 0.05  # of the plate's diagonal
# A cantilever whose end has turned by 0.1 rad deflects 0.4 % less than linear theory says, at
# 0.3 rad 4 % less (elastica: Bisshopp & Drucker, Quart. Appl. Math. 3, 1945).
ROTATION = 0.1  # radians
# Engineering and logarithmic strain differ by half the strain: by 1 % here.
STRAIN = 0.02


class _Extreme(NamedTuple):
    value: float
    at: list[float]
    case: str


@rule(
    "large-displacement",
    "check",
    title="Too large for small-displacement theory",
    looks_at="The largest displacement against the plate's diagonal; in the states that hold a "
    "peak also the largest rotation and the largest strain at element centres.",
    action="Use a geometrically non-linear analysis, or show that the change of shape does not "
    "matter; check units, stiffness and loads first.",
)
def large_displacement(context: ReviewContext) -> Iterator[Finding]:
    peak, size = context.worst("displacement"), context.mesh.diagonal
    if peak and peak.value > DISPLACEMENT * size:
        yield finding(
            f"In {peak.case!r} the displacement reaches {context.length(peak.value)}, "
            f"{peak.value / size:.1%} of the plate's diagonal.",
            quantity="displacement",
            value=peak.value,
            limit=DISPLACEMENT * size,
            at=peak.at,
            case=peak.case,
        )
    rotation, strain = _extremes(context)
    if rotation.value > ROTATION:
        yield finding(
            f"In {rotation.case!r} the plate turns by {rotation.value:.3g} rad.",
            quantity="rotation",
            value=rotation.value,
            limit=ROTATION,
            at=rotation.at,
            case=rotation.case,
        )
    if strain.value > STRAIN:
        yield finding(
            f"In {strain.case!r} the strain reaches {strain.value:.2%}.",
            quantity="strain",
            value=strain.value,
            limit=STRAIN,
            at=strain.at,
            case=strain.case,
        )


def _extremes(context: ReviewContext) -> tuple[_Extreme, _Extreme]:
    """Largest rotation and largest principal strain at element centres."""
    rotation = strain = _Extreme(0.0, [0.0, 0.0], "")
    for state in context.governing:
        for number, H in enumerate(context.displacement_gradients(state)):
            turned = np.abs(H[:, 0, 1] - H[:, 1, 0]) / 2
            # Of the symmetric part: mean plus and minus the radius of Mohr's circle.
            mean = np.abs(H[:, 0, 0] + H[:, 1, 1]) / 2
            radius = np.hypot(H[:, 0, 0] - H[:, 1, 1], H[:, 0, 1] + H[:, 1, 0]) / 2
            rotation = _larger(context, rotation, turned, number, state)
            strain = _larger(context, strain, mean + radius, number, state)
    return rotation, strain


def _larger(
    context: ReviewContext, known: _Extreme, values: np.ndarray, block: int, state: str
) -> _Extreme:
    worst = int(values.argmax())
    if values[worst] <= known.value:
        return known
    centre = context.mesh.nodes[context.mesh.blocks[block].connectivity[worst]].mean(axis=0)
    return _Extreme(float(values[worst]), centre.tolist(), state)
