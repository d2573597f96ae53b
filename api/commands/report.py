"""Results for people at a terminal: cautions first, then peaks, then what the supports carry."""

from collections.abc import Iterable, Mapping
from itertools import islice
from typing import Any

from rich.console import Console
from rich.markup import escape
from rich.table import Table

from workers.cautions import SEVERITIES

MOST_ROWS = 20  # a job of hundreds of cases is read in the results, not on a terminal
STYLES = {"stop": "bold red", "check": "yellow", "note": "dim"}


def print_results(console: Console, results: Mapping[str, Any]) -> None:
    """Summary of a results object (DESIGN.md, "The results")."""
    print_cautions(console, results["cautions"])
    states = {**results["cases"], **results.get("combinations", {})}
    worst_first = sorted(states.items(), key=lambda item: -item[1]["von_mises"]["value"])
    console.print()
    console.print(_peaks(worst_first, results["units"]))
    _say_omitted(console, worst_first)
    console.print(_reactions(worst_first, results["units"]))
    _say_omitted(console, worst_first)
    mesh, solver = results["mesh"], results["solver"]
    console.print(
        f"{mesh['nodes']} nodes, {_elements(mesh['elements'])}, {mesh['dofs']} dofs; "
        f"{solver['name']}, largest relative residual {solver['residual']:.1e}",
        style="dim",
    )


def print_cautions(console: Console, cautions: Iterable[Mapping[str, Any]]) -> None:
    """The gravest first, each with what to do."""
    order = list(SEVERITIES)
    for caution in sorted(cautions, key=lambda c: order.index(c["severity"])):
        style = STYLES[caution["severity"]]
        console.print(
            f"[{style}]{caution['severity']:>5}[/]  {escape(caution['message'])} "
            f"[italic]{escape(caution['action'])}[/italic]"
        )


def _peaks(states: list[tuple[str, Mapping[str, Any]]], units: Mapping[str, str]) -> Table:
    stress, length = units["stress"], units["length"]
    table = _table(
        "Peaks, the highest stress first",
        ("case", f"von Mises [{stress}]", f"at [{length}]", "of yield", f"moves [{length}]",
         "error estimate"),
    )  # fmt: skip
    for name, state in states[:MOST_ROWS]:
        peak = state["von_mises"]
        table.add_row(
            escape(name),
            number(peak["value"]) + _doubt(peak.get("error")),
            place(peak["at"]),
            _share(state.get("utilisation")),
            number(state["displacement"]["value"]),
            f"{state['error_estimate']['relative']:.1%}",
        )
    return table


def _reactions(states: list[tuple[str, Mapping[str, Any]]], units: Mapping[str, str]) -> Table:
    force, length = units["force"], units["length"]
    table = _table(
        "What the supports do to the plate",
        ("case", "support", f"x [{force}]", f"y [{force}]", f"moment [{force} {length}]",
         f"about [{length}]"),
    )  # fmt: skip
    for name, state in states[:MOST_ROWS]:
        for label, reaction in state["reactions"].items():
            fx, fy = reaction["force"]
            table.add_row(
                escape(name), escape(label), number(fx), number(fy),
                number(reaction["moment"]), place(reaction["about"]),
            )  # fmt: skip
    return table


def _table(title: str, columns: Iterable[str]) -> Table:
    table = Table(
        title=title, title_justify="left", box=None, header_style="italic", pad_edge=False
    )
    for i, column in enumerate(columns):
        table.add_column(escape(column), justify="left" if i == 0 else "right")
    return table


def _say_omitted(console: Console, states: list[Any]) -> None:
    if len(states) > MOST_ROWS:
        console.print(f"... and {len(states) - MOST_ROWS} more in the results", style="dim")


def _elements(counts: Mapping[str, int]) -> str:
    return ", ".join(f"{count} {name}" for name, count in islice(counts.items(), 8))


def _share(utilisation: Mapping[str, Any] | None) -> str:
    return "-" if utilisation is None else f"{utilisation['value']:.0%}"


def _doubt(error: float | None) -> str:
    return "" if error is None else f" ± {number(error)}"


def number(value: float) -> str:
    """Five digits are more than any of these numbers can be trusted for."""
    return f"{value:.5g}"


def place(at: Iterable[float]) -> str:
    return "(" + ", ".join(number(c) for c in at) + ")"
