"""What the review sheet tells of cuts and lines, and of many states at a glance: rows and plots.

Where there are many cases and combinations, the governing ones and the extremes stand for all.
"""

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from workers.geometry import Vector
from workers.job import Job
from workers.outputs.drawing.numbers import vector
from workers.outputs.leading import all_states, extremes, governing_states, severity
from workers.outputs.plots import Curve, Plot, lay_out

Json = Mapping[str, Any]

MOST_ROWS = 14  # states with a row in the table of a cut
MOST_CURVES = 3  # states with a curve of their own on the plot of a line
CUT_COMPONENTS = ("normal", "shear", "moment")
STRESS_COMPONENTS = ("\N{GREEK SMALL LETTER SIGMA}x", "\N{GREEK SMALL LETTER SIGMA}y", "τxy")
BY_NUMBER = "number of case or combination"
GIVEN = 6  # digits of places that the job gives


# --- cuts ----------------------------------------------------------------------------------------


@dataclass(frozen=True)
class CutRow:
    """Normal force, shear and moment of a state, and each as a part of the largest, -1 to 1."""

    state: str
    carried: Sequence[float]
    parts: Sequence[float]


@dataclass(frozen=True)
class CutPart:
    """plots : the components over all states, where the rows do not have them all"""

    name: str
    where: str
    about: Sequence[float]
    rows: list[CutRow]
    plots: list[Plot]


def cut_parts(job: Job, results: Json) -> list[CutPart]:
    return [_cut(job, results, name, by_state) for name, by_state in results["cuts"].items()]


def _cut(job: Job, results: Json, name: str, by_state: Json) -> CutPart:
    carried = {s: [found[c] for c in CUT_COMPONENTS] for s, found in by_state.items()}
    largest = [max(map(abs, column)) for column in zip(*carried.values(), strict=True)]
    shown, plots = list(by_state), []
    if len(by_state) > MOST_ROWS:
        at_the_ends = [e.state for e in extremes(name, by_state, CUT_COMPONENTS)]
        shown = list(dict.fromkeys([*governing_states(results), *at_the_ends]))
        plots = _cut_plots(job, name, list(carried.values()))
    asked = job.requests.cuts[name]
    return CutPart(
        name,
        _from_to(job, asked.start, asked.end),
        next(iter(by_state.values()))["about"],
        [CutRow(state, carried[state], _parts(carried[state], largest)) for state in shown],
        plots,
    )


def _parts(values: Sequence[float], largest: Sequence[float]) -> list[float]:
    return [v / most if most else 0.0 for v, most in zip(values, largest, strict=True)]


def _cut_plots(job: Job, name: str, carried: list[list[float]]) -> list[Plot]:
    force = job.units.force
    units = (force, force, f"{force}·{job.units.length}")
    return [
        lay_out(
            f"{component.capitalize()} in cut {name}",
            BY_NUMBER,
            f"{component} [{unit}]",
            range(1, len(carried) + 1),
            [Curve(component, column)],
        )
        for component, unit, column in zip(
            CUT_COMPONENTS, units, zip(*carried, strict=True), strict=True
        )
    ]


def _from_to(job: Job, start: Vector, end: Vector) -> str:
    return f"from {vector(*start, GIVEN)} to {vector(*end, GIVEN)} {job.units.length}"


# --- lines ---------------------------------------------------------------------------------------


@dataclass(frozen=True)
class LinePart:
    """The largest von Mises stress on a line, where and in which state; and the line's plots."""

    name: str
    where: str
    peak: float
    at: Sequence[float]
    state: str
    plots: list[Plot]


def line_parts(job: Job, results: Json) -> list[LinePart]:
    return [_line(job, results, name, line) for name, line in results["lines"].items()]


def _line(job: Job, results: Json, name: str, line: Json) -> LinePart:
    cases = line["cases"]
    ranked = sorted(cases, key=lambda state: -max(cases[state]["von_mises"]))
    von_mises = cases[ranked[0]]["von_mises"]
    number = max(range(len(von_mises)), key=lambda i: von_mises[i])
    asked = job.requests.lines[name]
    shown = ranked[:MOST_CURVES]
    if len(ranked) > MOST_ROWS:  # neighbours among many cases look all the same
        shown = list(dict.fromkeys((ranked[0], results["envelope"]["von_mises"]["governs"])))
    return LinePart(
        name,
        _from_to(job, asked.start, asked.end),
        von_mises[number],
        line["points"][number],
        ranked[0],
        [_von_mises_plot(job, name, line, shown), _component_plot(job, name, line, ranked[0])],
    )


def _von_mises_plot(job: Job, name: str, line: Json, shown: Sequence[str]) -> Plot:
    """Some states as curves, all of them as a band where there are more."""
    cases, band = line["cases"], None
    if len(cases) > len(shown):
        columns = list(zip(*(case["von_mises"] for case in cases.values()), strict=True))
        band = ([min(column) for column in columns], [max(column) for column in columns])
    return lay_out(
        f"Von Mises stress along {name}",
        f"distance along the line [{job.units.length}]",
        f"von Mises [{job.units.stress}]",
        line["distance"],
        [Curve(state, cases[state]["von_mises"]) for state in shown],
        band=band,
    )


def _component_plot(job: Job, name: str, line: Json, state: str) -> Plot:
    columns = zip(*line["cases"][state]["stress"], strict=True)
    return lay_out(
        f"Stress components along {name} in {state}",
        f"distance along the line [{job.units.length}]",
        f"stress [{job.units.stress}]",
        line["distance"],
        [Curve(c, column) for c, column in zip(STRESS_COMPONENTS, columns, strict=True)],
    )


# --- convergence ---------------------------------------------------------------------------------


def convergence_plot(job: Job, results: Json) -> Plot | None:
    """The governing peak over the element size there, with the value that the series tends to."""
    if results["convergence"] is None:
        return None
    state = results["envelope"]["von_mises"]["governs"]
    peak = results["convergence"]["peaks"][state]["von_mises"]
    return lay_out(
        f"Largest von Mises stress in {state} on finer meshes",
        f"size of the elements there [{job.units.length}]",
        f"von Mises [{job.units.stress}]",
        peak["sizes"][::-1],
        [Curve("on this mesh", peak["values"][::-1])],
        limit=peak["extrapolated"],
        marked=True,
    )


# --- all states at a glance ----------------------------------------------------------------------


def peak_plot(job: Job, results: Json) -> Plot:
    """Utilisation, or where no strength is known peak stress, over the states in their order."""
    states = list(all_states(results).values())
    known = all(state["utilisation"] is not None for state in states)
    what = "Share of the yield strength" if known else "Largest von Mises stress"
    return lay_out(
        f"{what} in every case and combination",
        BY_NUMBER,
        "of yield" if known else f"von Mises [{job.units.stress}]",
        range(1, len(states) + 1),
        [Curve(what, [severity(state) for state in states])],
        limit=1 / (job.limits.factor_on_yield or 1.0) if known else None,
    )
