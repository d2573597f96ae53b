"""What the review sheet tells of balance, cuts and lines: rows and plots, numbers cleared of noise.

Where there are many cases and combinations, each part shows the governing ones and the extremes.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Any

from workers.job import Job
from workers.outputs.drawing.numbers import vector
from workers.outputs.governing import (
    Extreme,
    all_states,
    cut_extremes,
    governing_states,
    plate_size,
    reaction_extremes,
    rounding_force,
    settled,
    severity,
    worth_a_row,
)
from workers.outputs.plots import Curve, Plot, lay_out

Json = Mapping[str, Any]

MOST_ROWS = 14  # of a table; for more states the governing ones and the extremes
MOST_CURVES = 3  # of states on one plot; the others as a band
CUT_COMPONENTS = ("normal", "shear", "moment")
STRESS_COMPONENTS = ("σx", "σy", "τxy")


# --- equilibrium and reactions -------------------------------------------------------------------


@dataclass(frozen=True)
class Balance:
    """Loads and reactions of one state about one point: x, y, moment."""

    state: str
    applied: Sequence[float]
    reaction: Sequence[float]
    residual: float


@dataclass(frozen=True)
class Reaction:
    state: str
    support: str
    shown: Sequence[float]
    about: Sequence[float]


@dataclass(frozen=True)
class BalancePart:
    """worst : the state with the largest residual; extremes : in place of the reactions of many"""

    balances: list[Balance]
    worst: Balance
    about: Sequence[float]
    reactions: list[Reaction]
    extremes: list[Extreme]


def balance_part(job: Job, results: Json) -> BalancePart:
    states, noise = all_states(results), _Noise(job, results)
    supports = len(next(iter(states.values()))["reactions"])
    shown = worth_a_row(results, MOST_ROWS)
    few = len(states) * supports <= 2 * MOST_ROWS
    balances = [
        Balance(
            name,
            noise.clear(name, states[name]["equilibrium"]["applied"]),
            noise.clear(name, states[name]["equilibrium"]["reaction"]),
            states[name]["equilibrium"]["residual"],
        )
        for name in states
    ]
    told = list(states) if few else list(governing_states(results))
    reactions = [
        Reaction(name, label, noise.clear(name, (*found["force"], found["moment"])), found["about"])
        for name in told
        for label, found in states[name]["reactions"].items()
    ]
    return BalancePart(
        [balance for balance in balances if balance.state in shown],
        max(balances, key=lambda balance: balance.residual),
        next(iter(states.values()))["equilibrium"]["about"],
        reactions,
        [] if few else [noise.cleared(extreme) for extreme in reaction_extremes(results)],
    )


# --- cuts ----------------------------------------------------------------------------------------


@dataclass(frozen=True)
class CutRow:
    """Normal force, shear and moment of a state, and each as a part of the largest, -1 to 1."""

    state: str
    shown: Sequence[float]
    parts: Sequence[float]


@dataclass(frozen=True)
class CutPart:
    name: str
    where: str
    about: Sequence[float]
    rows: list[CutRow]
    plots: list[Plot]


def cut_parts(job: Job, results: Json) -> list[CutPart]:
    noise = _Noise(job, results)
    return [_cut(job, results, noise, name, found) for name, found in results["cuts"].items()]


def _cut(job: Job, results: Json, noise: "_Noise", name: str, by_state: Json) -> CutPart:
    cleared = {
        state: noise.clear(state, [found[c] for c in CUT_COMPONENTS])
        for state, found in by_state.items()
    }
    most = [max(abs(values[i]) for values in cleared.values()) for i in range(3)]
    shown: list[str] = list(by_state)
    plots: list[Plot] = []
    if len(by_state) > MOST_ROWS:
        governing = dict.fromkeys(governing_states(results))
        shown = list(governing | dict.fromkeys(e.state for e in cut_extremes(by_state, name)))
        plots = _cut_plots(job, name, list(cleared.values()))
    cut = job.requests.cuts[name]
    return CutPart(
        name,
        f"from {vector(*cut.start, 6)} to {vector(*cut.end, 6)} {job.units.length}",
        next(iter(by_state.values()))["about"],
        [
            CutRow(s, cleared[s], [v / m if m else 0.0 for v, m in zip(cleared[s], most)])
            for s in shown
        ],
        plots,
    )


def _cut_plots(job: Job, name: str, values: list[list[float]]) -> list[Plot]:
    force = job.units.force
    units = (force, force, f"{force}·{job.units.length}")
    places = list(range(1, len(values) + 1))
    return [
        lay_out(
            f"{component.capitalize()} carried through {name}",
            "number of case or combination",
            f"{component} [{unit}]",
            places,
            [Curve(component, [v[i] for v in values])],
        )
        for i, (component, unit) in enumerate(zip(CUT_COMPONENTS, units, strict=True))
    ]


# --- lines ---------------------------------------------------------------------------------------


@dataclass(frozen=True)
class LinePart:
    name: str
    where: str
    peak: float
    peak_at: Sequence[float]
    state: str
    plots: list[Plot]


def line_parts(job: Job, results: Json) -> list[LinePart]:
    return [_line(job, results, name, line) for name, line in results["lines"].items()]


def _line(job: Job, results: Json, name: str, line: Json) -> LinePart:
    """Two plots: von Mises stress in the severest states, and the components in the first."""
    cases, distance = line["cases"], line["distance"]
    ranked = sorted(cases, key=lambda state: -max(cases[state]["von_mises"]))
    worst = ranked[0]
    von_mises = cases[worst]["von_mises"]
    number = max(range(len(von_mises)), key=lambda i: von_mises[i])
    asked = job.requests.lines[name]
    x_label, stress = f"distance along the line [{job.units.length}]", job.units.stress
    band = None
    if len(ranked) > MOST_CURVES:
        every = list(zip(*(case["von_mises"] for case in cases.values()), strict=True))
        band = [min(column) for column in every], [max(column) for column in every]
    tensors = list(zip(*cases[worst]["stress"], strict=True))
    return LinePart(
        name,
        f"from {vector(*asked.start, 6)} to {vector(*asked.end, 6)} {job.units.length}",
        von_mises[number],
        line["points"][number],
        worst,
        [
            lay_out(
                f"Von Mises stress along {name}",
                x_label,
                f"von Mises [{stress}]",
                distance,
                [Curve(state, cases[state]["von_mises"]) for state in ranked[:MOST_CURVES]],
                band=band,
            ),
            lay_out(
                f"Stress components along {name} in {worst}",
                x_label,
                f"stress [{stress}]",
                distance,
                [Curve(c, v) for c, v in zip(STRESS_COMPONENTS, tensors, strict=True)],
            ),
        ],
    )


# --- all states at a glance ----------------------------------------------------------------------


def peak_plot(job: Job, results: Json) -> Plot:
    """Peak von Mises stress, or where strengths are known utilisation, over the states."""
    states = list(all_states(results).values())
    used = all(state["utilisation"] is not None for state in states)
    factor = job.limits.factor_on_yield
    label = "of yield" if used else f"von Mises [{job.units.stress}]"
    return lay_out(
        "Utilisation of every case and combination"
        if used
        else "Peak von Mises stress of every case and combination",
        "number of case or combination",
        label,
        list(range(1, len(states) + 1)),
        [Curve(label, [severity(state) for state in states])],
        limit=1 / (factor or 1.0) if used else None,
    )


class _Noise:
    """Clears forces and moments of what is nothing but rounding in their state."""

    def __init__(self, job: Job, results: Json) -> None:
        stiffest = max(material.youngs_modulus for material in job.materials.values())
        self.size = plate_size(results)
        self.force = {
            name: rounding_force(results, state, stiffest)
            for name, state in all_states(results).items()
        }

    def clear(self, state: str, values: Sequence[float]) -> list[float]:
        """Two forces and a moment."""
        force = self.force[state]
        return [*settled(values[:2], force), *settled(values[2:], force * self.size)]

    def cleared(self, extreme: Extreme) -> Extreme:
        rounding = self.force[extreme.state]
        if extreme.component == "moment":
            rounding *= self.size
        return replace(extreme, value=settled([extreme.value], rounding)[0])
