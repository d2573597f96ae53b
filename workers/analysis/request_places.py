"""Are the places of the requests in the plate? Said before anything is solved."""

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from workers.analysis.border import Border, border_of, nearest, windings
from workers.analysis.hot_spots import reference_points, thickness_at
from workers.analysis.mesh import Mesh
from workers.analysis.section import find_section
from workers.errors import Fault, MeshError
from workers.job import HotSpot, Requests

Array = NDArray[np.float64]

# A point on a true arc lies a little outside the chords of T3 and Q4: so near the border, as a
# part of the length of its chord, it counts as inside.
BESIDE = 0.05
# Elements times cuts, or chords times points, that are looked at here: about a second. What is
# beyond is looked at by the analysis.
MOST_VISITS = 30_000_000


def request_faults(requests: Requests, mesh: Mesh, thickness: float) -> Iterator[Fault]:
    """Probes, lines and hot spots outside the plate, cuts that do not part it.

    thickness : the plate's [L]
    """
    border = border_of(mesh)
    visits = MOST_VISITS
    for name, place in requests.probes.items():
        visits -= len(border.row)
        if visits > 0 and (message := _outside(border, np.array(place, float))):
            yield Fault(f"/requests/probes/{name}", message)
    for line in requests.lines.values():
        visits -= line.points * len(border.row)
        if visits > 0:
            ends = np.array([line.start, line.end], float)
            steps = np.linspace(0, 1, line.points)[:, None]
            outside = (_outside(border, p) for p in (1 - steps) * ends[0] + steps * ends[1])
            if message := next((m for m in outside if m), None):
                yield Fault(line.pointer, message)
    for spot in requests.hot_spots.values():
        visits -= 3 * len(border.row)
        if visits > 0 and (message := _hot_spot_outside(border, spot, thickness)):
            yield Fault(spot.pointer, message)
    visits = MOST_VISITS
    for cut in requests.cuts.values():
        visits -= mesh.element_count
        if visits > 0:
            try:
                find_section(mesh, cut)
            except MeshError as error:
                yield from error.faults


def _hot_spot_outside(border: Border, spot: HotSpot, thickness: float) -> str | None:
    """What is wrong with the toe, or with a reference point before it."""
    if message := _outside(border, np.array(spot.at, float)):
        return f"the toe {message}"
    for point in reference_points(spot, thickness):
        if message := _outside(border, point):
            t = thickness_at(spot, thickness)
            return f"with t = {t:g} the reference point {message}; is the direction right?"
    return None


def _outside(border: Border, point: Array) -> str | None:
    """What is wrong with a point that is not in the plate; None if it is."""
    if windings(border, point) > 0:
        return None
    chord, foot = nearest(border, point)
    away = np.linalg.norm(foot - point)
    if away <= BESIDE * np.linalg.norm(border.end[chord] - border.start[chord]):
        return None
    return (
        f"({point[0]:.6g}, {point[1]:.6g}) is outside the plate; the nearest point of its border "
        f"is ({foot[0]:.6g}, {foot[1]:.6g}), {away:.6g} away"
    )
