"""Talking to the person at the terminal: progress, faults, exit statuses."""

import sys
from collections.abc import Callable, Iterable, Iterator, Mapping
from contextlib import contextmanager
from typing import Any, NoReturn

import click
from rich.console import Console
from rich.markup import escape
from rich.progress import BarColumn, Progress, TextColumn, TimeElapsedColumn

FAILED = 1
BAD_INPUT = 2
WIDTH = 110  # columns, where there is no terminal

# In the order in which a job goes through them, see `workers/pipeline.py`.
STAGES = ("reading", "meshing", "assembling", "factorising", "solving", "recovering", "reviewing",
          "writing", "drawing")  # fmt: skip

Report = Callable[[str, float], None]


def out() -> Console:
    """Results, on standard output; as wide as the terminal, or wide enough for the tables."""
    console = Console(highlight=False)
    return console if console.is_terminal else Console(highlight=False, width=WIDTH)


def err() -> Console:
    """Everything about the run, on standard error."""
    return Console(stderr=True, highlight=False)


@contextmanager
def progress() -> Iterator[Report]:
    """A function (stage, fraction) that shows a bar on a terminal and plain lines elsewhere."""
    console = err()
    if console.is_terminal:
        with _bar(console) as report:
            yield report
    else:
        yield _lines()


@contextmanager
def _bar(console: Console) -> Iterator[Report]:
    columns = (
        TextColumn("{task.description:<12}"),
        BarColumn(bar_width=40),
        TextColumn("{task.percentage:>3.0f}%"),
        TimeElapsedColumn(),
    )
    with Progress(*columns, console=console, transient=True) as bar:
        task = bar.add_task("waiting", total=len(STAGES))

        def report(stage: str, fraction: float) -> None:
            begun = STAGES.index(stage) + fraction if stage in STAGES else 0.0
            bar.update(task, description=stage, completed=begun)

        yield report


def _lines() -> Report:
    last = ""

    def report(stage: str, _fraction: float) -> None:
        nonlocal last
        if stage != last:  # one line for each stage is enough for a log
            last = stage
            print(stage, file=sys.stderr, flush=True)

    return report


def print_faults(faults: Iterable[Mapping[str, Any]]) -> None:
    """Where and what, one fault a line."""
    console = err()
    for fault in faults:
        place = fault.get("pointer", fault.get("parameter", "")) or "(document)"
        console.print(f"  [bold]{escape(place)}[/bold]  {escape(str(fault['message']))}",
                      soft_wrap=True)  # fmt: skip


def leave(status: int, message: str, faults: Iterable[Mapping[str, Any]] = ()) -> NoReturn:
    """Say why on standard error and end with the status."""
    err().print(f"[bold red]{escape(message)}[/bold red]", soft_wrap=True)
    print_faults(faults)
    click.get_current_context().exit(status)
