"""What the review rules read: the job, its mesh, its results, and the displacements behind them.

Rules for a job that was not solved yet see empty `states` and find what can be said without.
"""

from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field
from functools import cached_property
from typing import TYPE_CHECKING, Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from workers.analysis.combine import States, load_states
from workers.analysis.mesh import Mesh
from workers.analysis.selection import Selection, select
from workers.job import Job, Target

if TYPE_CHECKING:  # these bring SciPy, which the API process must not load
    from workers.analysis.recovery import Recovery
    from workers.analysis.solution import Solution

Array = NDArray[np.float64]


class Peak(NamedTuple):
    """The largest value of a quantity over the states, where it is, and in which state.

    record : the whole entry of the results, `value` and `at` included.
    """

    value: float
    at: list[float]
    case: str
    record: Mapping[str, Any]


@dataclass(frozen=True, eq=False)
class ReviewContext:
    """One job under review.

    results : as in results.json, cautions not needed; {} before the solution.
    solution, recovery : None where only the results are known.
    """

    job: Job
    mesh: Mesh
    results: Mapping[str, Any] = field(default_factory=dict)
    solution: "Solution | None" = None
    recovery: "Recovery | None" = None

    # --- states: load cases and combinations -------------------------------------------------

    @cached_property
    def states(self) -> dict[str, Mapping[str, Any]]:
        """Results of every load case and combination, by name."""
        return {**self.results.get("cases", {}), **self.results.get("combinations", {})}

    @property
    def names(self) -> tuple[str, ...]:
        """Names of all load cases and combinations, also before there are results."""
        return self._load_states.names

    def factors(self, state: str) -> Array:
        """Factor of every load case in a state, in the order of the job, (c,)."""
        return self._load_states.factors[:, self._load_states.index(state)]

    @cached_property
    def _load_states(self) -> States:
        return load_states(self.job)

    def peaks(self, quantity: str) -> list[Peak]:
        """The peak of a quantity in every state that has one, largest magnitude first."""
        found = [
            Peak(float(record["value"]), record["at"], name, record)
            for name, state in self.states.items()
            if (record := state.get(quantity)) is not None
        ]
        return sorted(found, key=lambda peak: -abs(peak.value))

    def summits(self, quantity: str) -> list[Peak]:
        """As `peaks`, but where a singular place was left out with the value and place there."""
        found = [
            peak._replace(value=float(hidden["value"]), at=hidden["at"])
            if (hidden := peak.record.get("singular"))
            else peak
            for peak in self.peaks(quantity)
        ]
        return sorted(found, key=lambda peak: -abs(peak.value))

    def summit_words(self, peak: Peak) -> str:
        """A von Mises peak of `summits`, as the subject of a sentence."""
        if peak.record.get("singular"):
            reported = self.stress(float(peak.record["value"]))
            return (
                f"The largest von Mises stress that the mesh shows in {peak.case!r}, "
                f"{self.stress(peak.value)} (left out of the reported peak, {reported}),"
            )
        return f"The peak von Mises stress of {peak.case!r}, {self.stress(peak.value)},"

    def worst(self, quantity: str) -> Peak | None:
        return next(iter(self.peaks(quantity)), None)

    @cached_property
    def governing(self) -> list[str]:
        """States that hold the largest value of some quantity: where field checks are made."""
        peaks = map(self.worst, ("von_mises", "principal_max", "principal_min", "displacement"))
        return list(dict.fromkeys(peak.case for peak in peaks if peak is not None))

    # --- displacements -----------------------------------------------------------------------

    def displacement(self, state: str) -> Array | None:
        """Displacement of the nodes in a state, (N, 2) [L]; None without a solution."""
        if self.solution is None:
            return None
        return self.solution.displacement @ self.factors(state)

    def displacement_gradients(self, state: str) -> list[Array]:
        """At the centre of every element, for each block (m, 2, 2): [i, j] = d u_j / d x_i.

        Empty without a solution.
        """
        u = self.displacement(state)
        if u is None:
            return []
        pairs = zip(self._centre_gradients, self.mesh.blocks, strict=True)
        return [G @ u[block.connectivity] for G, block in pairs]

    def free_strain(self, state: str) -> list[Array]:
        """Thermal strain alpha dT of every element in a state, for each block (m,)."""
        alpha = [self.job.material_of(name).thermal_expansion or 0.0 for name in self.mesh.regions]
        strains = [np.array(alpha)[block.region] for block in self.mesh.blocks]
        if self.solution is None or self.solution.temperature is None:
            return [0 * strain for strain in strains]
        pairs = zip(strains, self.solution.temperature, strict=True)
        return [strain * (change @ self.factors(state)) for strain, change in pairs]

    def nodal_stress(self, state: str) -> Array | None:
        """Recovered stress at the field points in a state, (P, 3) [F/L^2]; None if not known.

        Remembered: ask for the few states that matter, see `governing`.
        """
        u = self.displacement(state)
        if u is None or self.recovery is None:
            return None
        if state not in self._nodal_stress:
            temperature = None
            if self.solution is not None and self.solution.temperature is not None:
                factors = self.factors(state)[:, None]
                temperature = tuple(change @ factors for change in self.solution.temperature)
            nodal = self.recovery.nodal_stress(u[..., None], temperature)
            self._nodal_stress[state] = nodal[..., 0]
        return self._nodal_stress[state]

    @cached_property
    def _nodal_stress(self) -> dict[str, Array]:
        return {}

    @cached_property
    def _centre_gradients(self) -> list[Array]:
        """Derivatives of the shape functions at element centres, for each block (m, 2, n)."""
        found = []
        for number, block in enumerate(self.mesh.blocks):
            element = block.element
            centre = element.natural_nodes[: element.corners].mean(axis=0, keepdims=True)
            found.append(element.cartesian_gradients(self.mesh.coords(number), centre)[0][:, 0])
        return found

    # --- places ------------------------------------------------------------------------------

    def select(self, target: Target, pointer: str) -> Selection:
        """What a target of the job catches; remembered, because many loads share a target."""
        if target not in self._selections:
            self._selections[target] = select(self.mesh, target, pointer)
        return self._selections[target]

    @cached_property
    def _selections(self) -> dict[Target, Selection]:
        return {}

    @cached_property
    def element_size(self) -> Array:
        """Longest distance between corners of the elements at each node, (N,) [L]."""
        size = np.zeros(self.mesh.node_count)
        for number, block in enumerate(self.mesh.blocks):
            corners = self.mesh.coords(number)[:, : block.element.corners]
            apart = np.linalg.norm(corners[:, :, None] - corners[:, None], axis=-1).max(axis=(1, 2))
            for column in block.connectivity.T:
                np.maximum.at(size, column, apart)
        return size

    def nearest_node(self, at: Iterable[float]) -> int:
        return int(np.linalg.norm(self.mesh.nodes - np.array(list(at)), axis=1).argmin())

    @cached_property
    def regions_used(self) -> list[str]:
        """Names of the regions that have elements, in the order of the mesh."""
        used = np.unique(np.concatenate([block.region for block in self.mesh.blocks]))
        return [self.mesh.regions[number] for number in used]

    # --- words -------------------------------------------------------------------------------

    def stress(self, value: float) -> str:
        return f"{value:.4g} {self.job.units.stress}"

    def length(self, value: float) -> str:
        return f"{value:.4g} {self.job.units.length}"


NAMES_SHOWN = 6


def listed(names: Iterable[str]) -> str:
    """'a', 'b' and 3 more."""
    quoted = [repr(name) for name in names]
    more = f" and {len(quoted) - NAMES_SHOWN} more" if len(quoted) > NAMES_SHOWN else ""
    return ", ".join(quoted[:NAMES_SHOWN]) + more
