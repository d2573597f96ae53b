"""`fishplate verify`: the reference cases on the installed program, as a table and as a page."""

from pathlib import Path

import click

from api.commands.layout import print_cautions
from api.commands.terminal import BAD_INPUT, FAILED, err, leave, out
from workers.cautions import STANDING


@click.command()
@click.option("--out", "page", type=click.Path(dir_okay=False, path_type=Path),
              help="Write the record as a page of HTML, to print and file.")  # fmt: skip
@click.option("--only", default="", metavar="TEXT", help="Only cases with this in their name.")
def command(page: Path | None, only: str) -> None:
    """Run the reference cases on this installation.

    Prints each case with its source and every number with its target, deviation, tolerance and
    element. Takes about half a minute. Exit status 1 if any check fails.
    """
    # Take seconds to load, for which neither help nor completion should wait.
    from api.commands.verification import particulars, print_case  # noqa: PLC0415
    from workers.verification.catalogue import CASES  # noqa: PLC0415
    from workers.verification.page import render_page  # noqa: PLC0415
    from workers.verification.record import verify  # noqa: PLC0415

    console = out()
    print_cautions(console, [caution.as_json() for caution in STANDING])
    record = verify(lambda done: print_case(console, done), only)
    if not record.cases:
        names = ", ".join(case.name for cases in CASES.values() for case in cases)
        leave(BAD_INPUT, f"No case has {only!r} in its name. There are: {names}.")
    if page is not None:
        page.parent.mkdir(parents=True, exist_ok=True)
        page.write_text(render_page(record), encoding="utf-8")
        err().print(f"Written to {page}", soft_wrap=True)
    console.print(f"\n{particulars(record)}", style="dim", soft_wrap=True)
    if record.failed:
        leave(FAILED, f"{record.failed} checks failed, {record.passed} passed.")
    console.print(f"[bold green]All {record.passed} checks passed.[/bold green]")
