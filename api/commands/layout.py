"""How numbers, cautions and tables look on a terminal."""

from collections.abc import Iterable, Mapping, Sequence
from typing import Any

from rich.cells import cell_len, set_cell_size
from rich.console import Console
from rich.markup import escape
from rich.table import Table

from workers.cautions import SEVERITIES

STYLES = {"stop": "bold red", "check": "yellow", "note": "dim"}
GAP = 2  # between columns
LEAST = 10  # characters of a cell that is cut off


def number(value: float, digits: int = 5) -> str:
    """Five digits: more than any of these numbers can be trusted for."""
    return f"{float(f'{value:.{digits}g}'):.12g}"


def settled(value: float, scale: float) -> float:
    """Zero where the value is nothing but rounding beside what it was computed from."""
    return value if abs(value) > 1e-9 * scale else 0.0


def size(count: int) -> str:
    """Bytes, in the unit that suits them."""
    for unit, least in (("GiB", 1024**3), ("MiB", 1024**2), ("KiB", 1024)):
        if count >= least:
            return f"{count / least:.1f} {unit}"
    return f"{count} bytes"


def place(at: Iterable[float]) -> str:
    return "(" + ", ".join(number(c, 4) for c in at) + ")"


def print_cautions(console: Console, cautions: Iterable[Mapping[str, Any]]) -> None:
    """The gravest first, each with what to do."""
    order = list(SEVERITIES)
    grid = Table.grid(padding=(0, 2))
    for caution in sorted(cautions, key=lambda c: order.index(c["severity"])):
        style = STYLES[caution["severity"]]
        grid.add_row(
            f"[{style}]{caution['severity']}[/]",
            f"{escape(caution['message'])} [italic]{escape(caution['action'])}[/italic]",
        )
    console.print(grid)


def print_table(
    console: Console,
    title: str,
    columns: Sequence[str],
    rows: Iterable[Sequence[str]],
    words: int,
    cut: str | None = None,
) -> None:
    """A table under its title.

    The first `words` columns hold words, which are broken where there is no room; in the column
    `cut` they are cut off instead. The others hold numbers, which stay whole.
    """
    lines = [list(row) for row in rows]
    if cut is not None:
        _cut_off(lines, columns, columns.index(cut), console.width)
    table = Table(box=None, header_style="italic", pad_edge=False, padding=(0, GAP, 0, 0))
    for i, column in enumerate(columns):
        is_word = i < words
        table.add_column(
            escape(column), justify="left" if is_word else "right", overflow="fold",
            no_wrap=not is_word or column == cut,
        )  # fmt: skip
    for row in lines:
        table.add_row(*map(escape, row))
    console.print(f"\n[bold]{escape(title)}[/bold]", soft_wrap=True)
    console.print(table)


def _cut_off(lines: list[list[str]], columns: Sequence[str], which: int, width: int) -> None:
    """Shorten the cells of one column to what the others leave of the width."""
    others = (
        max(cell_len(cell) for cell in [columns[i], *(line[i] for line in lines)])
        for i in range(len(columns))
        if i != which
    )
    room = max(width - sum(others) - GAP * len(columns), LEAST)
    for line in lines:
        if cell_len(line[which]) > room:
            line[which] = set_cell_size(line[which], room - 1).rstrip() + "…"
