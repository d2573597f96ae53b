"""Results for people at a terminal: cautions first, then peaks, then what the supports carry."""

import math
from collections.abc import Iterator, Mapping
from typing import Any

from rich.console import Console

from api.commands.layout import number, place, print_cautions, print_table, settled

MOST_STATES = 20  # a job of hundreds of cases is read in the results, not on a terminal

States = list[tuple[str, Mapping[str, Any]]]


def print_results(console: Console, results: Mapping[str, Any]) -> None:
    """Summary of a results object (DESIGN.md, "The results")."""
    print_cautions(console, results["cautions"])
    units = results["units"]
    stress, force, length = units["stress"], units["force"], units["length"]
    every = {**results["cases"], **results["combinations"]}
    states = sorted(every.items(), key=lambda item: -item[1]["von_mises"]["value"])
    shown = states[:MOST_STATES]
    print_table(
        console,
        "Peaks, the highest stress first",
        ("case", f"von Mises\n[{stress}]", "\ndoubt", f"at\n[{length}]", "of\nyield",
         f"moves\n[{length}]", "error\nestimate"),
        _peaks(shown),
        words=1,
    )  # fmt: skip
    print_table(
        console,
        "What the supports do to the plate",
        ("case", "support", f"x\n[{force}]", f"y\n[{force}]", f"moment\n[{force} {length}]",
         f"about\n[{length}]"),
        _reactions(shown, _size(results["mesh"])),
        words=2,
    )  # fmt: skip
    if len(states) > len(shown):
        console.print(f"\n... and {len(states) - len(shown)} more cases in the results")
    _print_size(console, results)


def _peaks(states: States) -> Iterator[tuple[str, ...]]:
    for name, state in states:
        peak, use = state["von_mises"], state["utilisation"]
        yield (
            name,
            number(peak["value"]),
            _share(peak["error"], peak["value"]),
            place(peak["at"]),
            "-" if use is None else f"{use['value']:.0%}",
            number(state["displacement"]["value"]),
            f"{state['error_estimate']['relative']:.1%}",
        )


def _share(error: float | None, value: float) -> str:
    return "-" if error is None or value == 0.0 else f"± {error / value:.1%}"


def _reactions(states: States, size: float) -> Iterator[tuple[str, ...]]:
    """size : of the plate, to tell a moment from rounding [L]"""
    for name, state in states:
        found = state["reactions"]
        largest = max((abs(c) for r in found.values() for c in r["force"]), default=0.0)
        for label, reaction in found.items():
            fx, fy = (settled(component, largest) for component in reaction["force"])
            moment = settled(reaction["moment"], largest * size)
            about = place(settled(c, size) for c in reaction["about"])
            yield name, label, number(fx), number(fy), number(moment), about


def _size(mesh: Mapping[str, Any]) -> float:
    return math.sqrt(sum(region["area"] for region in mesh["regions"].values()))


def _print_size(console: Console, results: Mapping[str, Any]) -> None:
    mesh, solver = results["mesh"], results["solver"]
    elements = ", ".join(f"{count} {name}" for name, count in mesh["elements"].items())
    console.print(
        f"\n{mesh['nodes']} nodes, {elements}, {mesh['dofs']} dofs; {solver['name']}, largest "
        f"relative residual {solver['residual']:.1e}",
        style="dim",
    )
