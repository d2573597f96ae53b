"""Rules about the system of equations: nearly free motions, lost digits, open equilibrium."""

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from workers.analysis.effort import ENERGY_ERROR
from workers.job import Support, TemperatureChange
from workers.review.context import ReviewContext
from workers.review.rule import Finding, finding, rule

# Displacement over size, divided by peak strain. A cantilever of length L and depth h under an
# end load has 2/3 L/h (beam theory); no plate is a thousand times longer than deep.
RIGID_SHARE = 1e3
# 16-digit arithmetic leaves a relative displacement error of at most about 2e-16 / this number
# (Higham, *Accuracy and Stability of Numerical Algorithms*, 2nd ed., sec. 7.1): 2e-4.
SMALLEST_RECIPROCAL_CONDITION = 1e-12
# The solver's residual is 1e-10 at worst; four decades of room for cancelling loads.
OPEN_EQUILIBRIUM = 1e-6


def prescribed_values(support: Support) -> list[float]:
    """Non-zero prescribed displacements of a support [L]."""
    values = (support.ux, support.uy, support.normal, support.displacement)
    return [value for value in values if value]


@rule(
    "near-mechanism",
    "check",
    title="The plate moves almost freely",
    looks_at="The largest displacement as a part of the plate's size, against the peak strain.",
    action="Add the support that is missing, or check the stiffness of the springs.",
)
def near_mechanism(context: ReviewContext) -> Iterator[Finding]:
    if any(prescribed_values(support) for support in context.job.supports):
        return  # a settlement moves the plate without straining it, as it should
    worst = None
    heating = _free_strains(context)
    for peak in context.peaks("displacement"):
        stress = context.states[peak.case].get("von_mises")
        if not stress or not stress["value"]:
            continue
        modulus = context.job.material_of(stress.get("region") or "").youngs_modulus
        strain = stress["value"] / modulus + np.abs(context.factors(peak.case)) @ heating
        share = peak.value / context.mesh.diagonal / strain
        if share > RIGID_SHARE and (worst is None or share > worst[0]):
            worst = share, peak
    if worst:
        share, peak = worst
        yield finding(
            f"In {peak.case!r} the plate moves by {context.length(peak.value)} while it is hardly "
            f"strained: {share:.3g} times more than its strain explains.",
            value=share,
            limit=RIGID_SHARE,
            at=peak.at,
            case=peak.case,
        )


def _free_strains(context: ReviewContext) -> NDArray[np.float64]:
    """Largest thermal strain of each load case, which moves the plate without stress, (c,)."""
    largest = max((m.thermal_expansion or 0.0 for m in context.job.materials.values()), default=0.0)
    return largest * np.array(
        [
            sum(abs(load.change) for load in case.loads if isinstance(load, TemperatureChange))
            for case in context.job.load_cases
        ]
    )


@rule(
    "ill-conditioned",
    "check",
    title="Digits lost in the solution",
    looks_at="The reciprocal condition of the stiffness matrix, as the solver estimates it.",
    action="Look for very soft supports, very slender parts or stiffnesses many decades apart; "
    "repeat the job with a changed mesh and compare the displacements.",
)
def ill_conditioned(context: ReviewContext) -> Iterator[Finding]:
    if context.solution is None:
        return
    condition = context.solution.solver.reciprocal_condition
    if condition < SMALLEST_RECIPROCAL_CONDITION:
        yield finding(
            f"The stiffness matrix has a reciprocal condition of {condition:.2g}: rounding may put "
            f"displacements off by a fraction of {2.2e-16 / max(condition, 2.2e-16):.1g}.",
            value=condition,
            limit=SMALLEST_RECIPROCAL_CONDITION,
        )


@rule(
    "solved-by-iteration",
    "note",
    title="Solved by iteration, without a factor",
    looks_at="Whether the factor of the stiffness matrix would have fitted the memory.",
    action="Compare the equilibrium of every case with what the decision needs; for the usual "
    "ten digits use a coarser mesh, or have the memory limit raised.",
)
def solved_by_iteration(context: ReviewContext) -> Iterator[Finding]:
    if context.solution is None or (effort := context.solution.solver.iteration) is None:
        return
    residual = float(context.solution.solver.residual.max())
    yield finding(
        "The factor would not have fitted the memory, so every case was solved by conjugate "
        f"gradients: the forces left out of balance are at most {residual:.1e} of the load (a "
        "factor leaves 1e-10), the error in the energy norm is estimated at "
        f"{effort.energy_error:.1e} of the solution.",
        value=effort.energy_error,
        limit=ENERGY_ERROR,
        residual=residual,
        iterations=effort.iterations,
    )


@rule(
    "equilibrium-open",
    "stop",
    title="Loads and reactions do not balance",
    looks_at="Applied forces plus reactions of every case, relative to the load.",
    action="Do not use the results; report the job to whoever runs the server.",
)
def equilibrium_open(context: ReviewContext) -> Iterator[Finding]:
    residuals = {
        name: float(state["equilibrium"]["residual"])
        for name, state in context.states.items()
        if state.get("equilibrium")
    }
    name = max(residuals, key=lambda name: residuals[name], default=None)
    if name is not None and not residuals[name] <= OPEN_EQUILIBRIUM:
        yield finding(
            f"In {name!r} loads and reactions differ by {residuals[name]:.2g} of the load.",
            value=residuals[name],
            limit=OPEN_EQUILIBRIUM,
            case=name,
        )
