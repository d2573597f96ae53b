"""The convergence record: what each mesh of a series showed, and what the series says of the peaks.

Adds to the results of the last mesh: `convergence`; the interval of each peak stress in the light
of the series; whether the stress at a singular place grew as the theory says.
"""

from dataclasses import dataclass, field
from itertools import pairwise
from typing import Any

import numpy as np
from numpy.typing import NDArray
from scipy.spatial import KDTree

from elements.registry import get
from workers.analysis.envelope import WORST
from workers.analysis.grid_convergence import SURE, UNSURE, grid_convergence
from workers.analysis.mesh import Mesh
from workers.analysis.meshing.size_field import element_areas

Array = NDArray[np.float64]
Json = dict[str, Any]

SAME_PLACE = 1e-6  # of the diagonal
SAME_RADIUS = 1e-6  # relative
WANDERS = 2.0  # element sizes of the coarser mesh: a peak that moved so far is another one
# Parts of the growth that theory foretells: from the first on it is confirmed, below the second
# refuted. The recovered stress smooths coarse meshes: on three of a panel with a corner, six to
# twelve elements to its legs, it grew by 0.4 to 0.55 of the exponent.
CONFIRMS, REFUTES = 0.35, 0.1
LEAST_SHARE = 0.25  # of the interval by one mesh, that a series can narrow it to
LEAST_LEVER = 1.5  # of element sizes, over which growth can be told


@dataclass(frozen=True, eq=False)
class _Mesh:
    """One mesh of the series. sizes : root of the mean element area at each peak, by state."""

    dofs: int
    elements: int
    states: Json
    sizes: dict[str, dict[str, float]]

    def largest_stress(self, name: str) -> float:
        return float(self.states[name]["von_mises"]["value"])


@dataclass
class Record:
    """Grows mesh by mesh; element : the type, as the job names it."""

    element: str
    meshes: list[_Mesh] = field(default_factory=list)
    diagonal: float = 0.0

    def add(self, mesh: Mesh, results: Json) -> None:
        """Take in the results of the next mesh."""
        states = {**results["cases"], **results["combinations"]}
        kept = {
            name: {key: state[key] for key in (*WORST, "error_estimate")}
            for name, state in states.items()
        }
        self.meshes.append(
            _Mesh(mesh.dof_count, mesh.element_count, kept, _sizes_at_peaks(mesh, states))
        )
        self.diagonal = mesh.diagonal

    def write(self, results: Json, **facts: Any) -> None:
        """Put the record into the results of the last mesh; facts : how it came about."""
        peaks: Json = {}
        uniform = facts["kind"] == "series"
        for section in ("cases", "combinations"):
            for name, state in results[section].items():
                peaks[name] = {}
                for quantity in WORST:
                    entry = self._peak(name, quantity, uniform)
                    peaks[name][quantity] = entry
                    state[quantity] = self._judged(state[quantity], name, quantity, entry)
        for quantity in WORST:
            governing = results["envelope"][quantity]
            state = {**results["cases"], **results["combinations"]}[governing["governs"]]
            governing.update({key: state[quantity][key] for key in ("interval", "singular")})
        results["convergence"] = {**facts, "meshes": self._meshes(), "peaks": peaks}

    def _meshes(self) -> list[Json]:
        found = []
        for mesh in self.meshes:
            errors = {name: s["error_estimate"]["relative"] for name, s in mesh.states.items()}
            worst = max(errors, key=lambda name: errors[name])
            found.append(
                {
                    "dofs": mesh.dofs,
                    "elements": mesh.elements,
                    "relative_error": errors[worst],
                    "case": worst,
                }
            )
        return found

    # --- one peak ------------------------------------------------------------------------------

    def _peak(self, name: str, quantity: str, uniform: bool) -> Json:
        """Values of a peak on all meshes, and what they say."""
        peaks = [mesh.states[name][quantity] for mesh in self.meshes]
        if uniform:
            sizes = [mesh.dofs**-0.5 for mesh in self.meshes]
        else:
            sizes = [mesh.sizes[name][quantity] for mesh in self.meshes]
        same = _alike(peaks)
        verdict = grid_convergence(
            [peak["value"] for peak in peaks[-same:]],
            sizes[-same:],
            self._highest_order(quantity),
            SURE if uniform else UNSURE,
            # A principal stress that vanishes by the theory is rounding of the others.
            0.0 if quantity == "displacement" else self.meshes[-1].largest_stress(name),
            not self._wanders(name, quantity),
        )
        return {
            "values": [peak["value"] for peak in peaks],
            "at": [peak["at"] for peak in peaks],
            "sizes": [mesh.sizes[name][quantity] for mesh in self.meshes],
            "behaviour": verdict.behaviour,
            "observed_order": verdict.order,
            "extrapolated": verdict.extrapolated,
            "uncertainty": verdict.uncertainty,
        }

    def _highest_order(self, quantity: str) -> float:
        """Recovered stress mostly converges faster than the elements' own, but an order above
        theirs may be chance, and would make the uncertainty too small.
        """
        order = get(self.element).order
        return float(order if quantity != "displacement" else order + 1)

    def _wanders(self, name: str, quantity: str) -> bool:
        """Whether a peak of the last three meshes is somewhere else than on the mesh before."""
        last = self.meshes[-3:]
        return any(
            np.linalg.norm(np.subtract(*(m.states[name][quantity]["at"] for m in (before, after))))
            > WANDERS * before.sizes[name][quantity]
            for before, after in pairwise(last)
        )

    def _judged(self, peak: Json, name: str, quantity: str, entry: Json) -> Json:
        """The reported peak in the light of the series."""
        if peak["interval"] is None:
            return peak
        low, high = peak["interval"]
        value, uncertainty = peak["value"], entry["uncertainty"]
        if entry["behaviour"] == "converging":
            # What a series shows counts for more than what one mesh guesses, within reason; and
            # never less than the change that is still to come.
            below, above = value - low, high - value
            low = value - min(below, max(uncertainty, LEAST_SHARE * below))
            high = value + min(above, max(uncertainty, LEAST_SHARE * above))
            low, high = min(low, entry["extrapolated"]), max(high, entry["extrapolated"])
        if quantity in ("von_mises", "shear_max"):
            low = max(low, 0.0)
        singular = peak["singular"]
        if singular is not None:
            singular = {**singular, "confirmed": self._confirmed(name, quantity, singular)}
        return {**peak, "interval": [low, high], "singular": singular}

    def _confirmed(self, name: str, quantity: str, singular: Json) -> bool | None:
        """Whether the stress grew with falling element size as r^(lambda - 1) foretells.

        None where the meshes do not settle it.
        """
        seen = [mesh.states[name][quantity]["singular"] for mesh in self.meshes]
        seen = [
            one
            for one in seen
            if one is not None
            and np.hypot(one["at"][0] - singular["at"][0], one["at"][1] - singular["at"][1])
            <= SAME_PLACE * self.diagonal
        ]
        first, last = seen[0], seen[-1]
        if len(seen) < 2 or not first["value"] or not last["value"]:
            return None
        if first["element_size"] < LEAST_LEVER * last["element_size"]:
            return None
        growth = np.log(abs(last["value"] / first["value"]))
        growth /= np.log(first["element_size"] / last["element_size"])
        part = float(growth / (1 - singular["exponent"]))
        return None if REFUTES <= part < CONFIRMS else part >= CONFIRMS


def _alike(peaks: list[Json]) -> int:
    """How many of the last meshes left out the same neighbourhood: only they compare."""
    last = peaks[-1]["singular"]
    count = 0
    for peak in reversed(peaks):
        one = peak["singular"]
        if (one is None) != (last is None):
            break
        if last is not None and abs(one["radius"] - last["radius"]) > SAME_RADIUS * last["radius"]:
            break
        count += 1
    return count


def _sizes_at_peaks(mesh: Mesh, states: Json) -> dict[str, dict[str, float]]:
    """Root of the mean area of the elements around each peak [L]."""
    areas, total, count = element_areas(mesh), np.zeros(mesh.node_count), np.zeros(mesh.node_count)
    first = 0
    for block in mesh.blocks:
        own = areas[first : first + block.element_count]
        first += block.element_count
        nodes = block.connectivity
        total += np.bincount(nodes.ravel(), np.repeat(own, nodes.shape[1]), mesh.node_count)
        count += np.bincount(nodes.ravel(), minlength=mesh.node_count)
    tree = KDTree(mesh.nodes)
    keys = [(name, quantity) for name in states for quantity in WORST]
    _, node = tree.query([states[name][quantity]["at"] for name, quantity in keys])
    sizes: dict[str, dict[str, float]] = {name: {} for name in states}
    for (name, quantity), size in zip(keys, np.sqrt(total[node] / count[node]), strict=True):
        sizes[name][quantity] = float(size)
    return sizes
