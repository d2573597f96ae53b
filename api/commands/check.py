"""`fishplate check`: what a job document was understood to say, before anything is solved."""

from collections.abc import Iterator, Mapping
from contextlib import ExitStack
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import Any

import click
from rich.console import Console
from rich.markup import escape

from api.commands.documents import DocumentPath
from api.commands.folders import OF_A_CHECK, name_files, refuse_foreign, replaced
from api.commands.layout import number, place, print_cautions, print_table
from api.commands.terminal import BAD_INPUT, FAILED, leave, out, progress
from elements.errors import FishplateError
from workers.errors import FaultyError

Check = Mapping[str, Any]
Row = tuple[str, ...]

MOST_STATES = 20  # a job of hundreds of cases is read in check.json, not on a terminal
MEBIBYTE = 1024**2


@click.command()
@click.argument("job", type=DocumentPath())
@click.option(
    "--out",
    "folder",
    type=click.Path(file_okay=False, path_type=Path),
    help="Folder for check.json and pictures of the plate with its loads; without it, no files.",
)
@click.option("--pictures", default=6, show_default=True, type=click.IntRange(0, 1000),
              help="Of how many cases to draw the loads, with --out.")  # fmt: skip
def command(job: Path, folder: Path | None, pictures: int) -> None:
    """Read the job document JOB and say what was understood.

    Meshes the plate, finds every support and load on it, adds up what each case applies, and
    estimates what the job would cost. Solves nothing. Ends with 0, or with 2 where the document is
    wrong.
    """
    if folder is not None:
        refuse_foreign(folder, OF_A_CHECK, "an earlier check")
    with ExitStack() as places:
        if folder is None:
            fresh = Path(places.enter_context(TemporaryDirectory()))
        else:
            fresh = places.enter_context(replaced(folder))
        found = _check(job.read_bytes(), fresh, 0 if folder is None else pictures)
    print_check(out(), found)
    if folder is not None:
        if not found["pictures"]["available"]:
            out().print(f"\nNo pictures: {found['pictures']['reason']}", soft_wrap=True)
        name_files(folder)


def _check(document: bytes, folder: Path, pictures: int) -> Check:
    # Takes seconds to load, for which neither help nor completion should wait.
    from workers import checking  # noqa: PLC0415

    try:
        with progress() as report:
            return checking.check(document, folder, progress=report, pictures=pictures)
    except FaultyError as error:
        faults = [fault.as_json() for fault in error.faults]
        leave(BAD_INPUT, "The job document is wrong.", faults)
    except (FishplateError, OSError, MemoryError) as error:
        leave(FAILED, f"The job could not be checked: {error or 'out of memory'}")


def print_check(console: Console, check: Check) -> None:
    """Summary of a check: cautions first, then the plate, supports, loads and cost."""
    print_cautions(console, check["cautions"])
    length, force = check["units"]["length"], check["units"]["force"]
    _print_plate(console, check)
    print_table(
        console,
        "Supports",
        ("name", "on", "holds", "nodes", f"length [{length}]"),
        _supports(check),
        words=3,
    )
    print_table(console, "Loads", ("case", "on", "load"), _loads(check), words=3)
    print_table(
        console,
        f"Applied by the loads, moments about the centroid {place(check['plate']['centroid'])}",
        ("case", f"x [{force}]", f"y [{force}]", f"moment [{force} {length}]"),
        _sums(check),
        words=1,
    )
    states = len(check["cases"]) + len(check["combinations"])
    if states > MOST_STATES or len(check["load_cases"]) > MOST_STATES:
        console.print(f"\n... {states} cases and combinations in all; `--out` writes them down")
    _print_cost(console, check)


def _print_plate(console: Console, check: Check) -> None:
    plate, mesh, units = check["plate"], check["mesh"], check["units"]
    length, parts = units["length"], mesh["parts"]
    elements = ", ".join(f"{count} {name}" for name, count in sorted(mesh["elements"].items()))
    mass = plate["mass"]
    weighs = "mass unknown" if mass is None else f"{number(mass['value'])} {mass['unit']}"
    console.print(
        f"\n[bold]{escape(check['job']['title'])}[/bold]  in {length} and {units['force']}"
    )
    console.print(f"from {place(plate['from'])} to {place(plate['to'])} {length}: "
                  f"{' x '.join(map(number, plate['size']))} {length}, "
                  f"area {number(plate['area'])} {length}2, {weighs}")  # fmt: skip
    console.print(f"{mesh['nodes']} nodes, {elements}, {parts} part{'s' if parts != 1 else ''}; "
                  + ", ".join(_quality(mesh["quality"])))  # fmt: skip
    for name, region in mesh["regions"].items():
        console.print(
            f"{escape(name)}: {number(region['thickness'])} {length} of "
            f"{escape(region['material'])}, area {number(region['area'])} {length}2"
        )


def _quality(quality: Check) -> Iterator[str]:
    """The worst of each measure, in words."""
    words = {
        "min_angle": "smallest angle {} degrees",
        "max_aspect": "largest aspect {}",
        "min_scaled_jacobian": "smallest scaled Jacobian {}",
    }
    for name, measure in quality.items():
        bad = f" ({measure['bad']} of them beyond {number(measure['limit'])})"
        yield words[name].format(number(measure["value"], 3)) + (bad if measure["bad"] else "")


def _supports(check: Check) -> Iterator[Row]:
    for label, support in check["supports"].items():
        length = number(support["length"]) if support["length"] else "-"
        yield label, support["on"], support["holds"], str(support["nodes"]), length


def _loads(check: Check) -> Iterator[Row]:
    for case, content in list(check["load_cases"].items())[:MOST_STATES]:
        for load in content["loads"]:
            yield case, load["on"], load["load"]


def _sums(check: Check) -> Iterator[Row]:
    states = {**check["cases"], **check["combinations"]}
    for name, state in list(states.items())[:MOST_STATES]:
        yield name, *map(number, state["force"]), number(state["moment"])


def _print_cost(console: Console, check: Check) -> None:
    cost = check["estimate"]
    memory, seconds = cost["memory"]["bytes"] / MEBIBYTE, cost["time"]["seconds"]
    console.print(
        f"\nTo solve it: {cost['dofs']} unknowns, about {number(memory, 2)} MiB of memory and "
        f"{number(seconds, 2)} s of one processor, pictures included"
    )
    console.print(cost["basis"], style="dim")
