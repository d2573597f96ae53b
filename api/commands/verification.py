"""The reference cases on a terminal; loads the solver, so only when they are run."""

from rich.console import Console
from rich.markup import escape
from rich.table import Table

from workers.verification.page import figure, part, tolerance
from workers.verification.record import CaseRecord, Record, Row

PASS = {True: "[green]pass[/green]", False: "[bold red]FAIL[/bold red]", None: "[dim]info[/dim]"}


def print_case(console: Console, done: CaseRecord) -> None:
    """A case as it is done: its source, then a line for every number."""
    console.print(f"\n[bold]{escape(done.case.name)}[/bold]  [dim]{done.seconds:.1f} s[/dim]")
    console.print(f"[italic dim]{escape(done.case.source)}[/italic dim]")
    table = Table(box=None, header_style="italic", pad_edge=False, padding=(0, 2, 0, 0))
    for name in ("", "element", "quantity"):
        table.add_column(name, overflow="fold", no_wrap=name != "quantity")
    for name in ("found", "target", "off by", "tolerance"):
        table.add_column(name, justify="right", no_wrap=True)
    for row in done.rows:
        table.add_row(*_cells(row))
    console.print(table)


def _cells(row: Row) -> tuple[str, ...]:
    check = row.check
    if check is None:
        return PASS[False], "", escape(row.trouble)
    return (
        PASS[row.passed],
        escape(check.element),
        escape(check.quantity),
        figure(check.computed),
        figure(check.target),
        part(check),
        tolerance(check),
    )


def particulars(record: Record) -> str:
    versions = ", ".join(f"{name} {value}" for name, value in record.versions.items())
    return f"{versions}; {', '.join(record.machine.values())}; {record.when:%Y-%m-%d %H:%M} UTC"
