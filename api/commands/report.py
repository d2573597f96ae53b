"""Results for people at a terminal: cautions first, then peaks, then what the supports carry."""

from collections.abc import Iterator, Mapping
from typing import Any

from rich.console import Console

from api.commands.layout import number, place, print_cautions, print_table

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
        ("case", f"von Mises [{stress}]", f"at [{length}]", "of yield", f"moves [{length}]",
         "error estimate"),
        _peaks(shown),
        words=1,
    )  # fmt: skip
    print_table(
        console,
        "What the supports do to the plate",
        ("case", "support", f"x [{force}]", f"y [{force}]", f"moment [{force} {length}]",
         f"about [{length}]"),
        _reactions(shown),
        words=2,
    )  # fmt: skip
    if len(states) > len(shown):
        console.print(f"\n... and {len(states) - len(shown)} more cases in the results")
    _print_size(console, results)


def _peaks(states: States) -> Iterator[tuple[str, ...]]:
    for name, state in states:
        peak, use = state["von_mises"], state["utilisation"]
        doubt = peak.get("error")
        yield (
            name,
            number(peak["value"]) + ("" if doubt is None else f" ± {number(doubt)}"),
            place(peak["at"]),
            "-" if use is None else f"{use['value']:.0%}",
            number(state["displacement"]["value"]),
            f"{state['error_estimate']['relative']:.1%}",
        )


def _reactions(states: States) -> Iterator[tuple[str, ...]]:
    for name, state in states:
        for label, reaction in state["reactions"].items():
            numbers = (*reaction["force"], reaction["moment"])
            yield name, label, *map(number, numbers), place(reaction["about"])


def _print_size(console: Console, results: Mapping[str, Any]) -> None:
    mesh, solver = results["mesh"], results["solver"]
    elements = ", ".join(f"{count} {name}" for name, count in mesh["elements"].items())
    console.print(
        f"\n{mesh['nodes']} nodes, {elements}, {mesh['dofs']} dofs; {solver['name']}, largest "
        f"relative residual {solver['residual']:.1e}",
        style="dim",
    )
