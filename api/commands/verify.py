"""`fishplate verify`: the reference cases on the installed program, as a table and as a page."""

from pathlib import Path

import click
from rich.console import Console
from rich.markup import escape

from api.commands.layout import print_cautions
from api.commands.terminal import BAD_INPUT, FAILED, err, leave, out
from workers.cautions import STANDING
from workers.verification.page import figure, part, render_page, tolerance
from workers.verification.record import CaseRecord, Record, Row, verify

PASS = {True: "[green]pass[/green]", False: "[bold red]FAIL[/bold red]", None: "[dim]info[/dim]"}


@click.command()
@click.option("--out", "page", type=click.Path(dir_okay=False, path_type=Path),
              help="Write the record as a page of HTML, to print and file.")  # fmt: skip
@click.option("--only", default="", metavar="TEXT", help="Only cases with this in their name.")
def command(page: Path | None, only: str) -> None:
    """Run the reference cases on this installation.

    Prints each case with its source and every number with its target, deviation, tolerance and
    element. Takes about half a minute. Exit status 1 if any check fails.
    """
    console = out()
    print_cautions(console, [caution.as_json() for caution in STANDING])
    record = verify(lambda done: print_case(console, done), only)
    if not record.cases:
        leave(BAD_INPUT, f"No case has {only!r} in its name.")
    if page is not None:
        page.parent.mkdir(parents=True, exist_ok=True)
        page.write_text(render_page(record), encoding="utf-8")
        err().print(f"Written to {page}", soft_wrap=True)
    console.print(f"\n{_particulars(record)}", style="dim", soft_wrap=True)
    if record.failed:
        leave(FAILED, f"{record.failed} checks failed, {record.passed} passed.")
    console.print(f"[bold green]All {record.passed} checks passed.[/bold green]")


def print_case(console: Console, done: CaseRecord) -> None:
    """A case as it is done: its source, then a line for every number."""
    console.print(f"\n[bold]{escape(done.case.name)}[/bold]  [dim]{done.seconds:.1f} s[/dim]")
    console.print(f"[italic dim]{escape(done.case.source)}[/italic dim]")
    for row in done.rows:
        console.print(_line(row), soft_wrap=True)


def _line(row: Row) -> str:
    check = row.check
    if check is None:
        return f"  {PASS[False]}  {escape(row.trouble)}"
    return (
        f"  {PASS[row.passed]}  {escape(check.element):<8} {escape(check.quantity):<52} "
        f"{figure(check.computed):>12}  target {figure(check.target)}, {part(check)} "
        f"[dim]({'' if check.tolerance is None else 'tolerance '}{tolerance(check)})[/dim]"
    )


def _particulars(record: Record) -> str:
    versions = ", ".join(f"{name} {value}" for name, value in record.versions.items())
    return f"{versions}; {', '.join(record.machine.values())}; {record.when:%Y-%m-%d %H:%M} UTC"
