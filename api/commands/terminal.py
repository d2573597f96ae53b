"""Talking to the person at the terminal: progress, faults, exit statuses."""

import sys
from collections.abc import Callable, Iterable, Iterator, Mapping
from contextlib import contextmanager
from typing import Any, NoReturn

import click
from rich.console import Console
from rich.markup import escape
from rich.progress import (
    BarColumn,
    Progress,
    ProgressColumn,
    TextColumn,
    TimeElapsedColumn,
    TimeRemainingColumn,
)
from rich.table import Column

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
        with _bar(console) as bar:
            task = bar.add_task("waiting", total=1.0)
            yield lambda stage, fraction: bar.update(
                task, description=stage, completed=_part(stage, fraction)
            )
    else:
        yield _lines()


class Many:
    """How far many jobs are: one bar for all on a terminal, a line for each job elsewhere."""

    def __init__(self, total: int, bar: Progress | None) -> None:
        self._total, self._done, self._bar = total, 0, bar
        if bar is not None:
            self._task = bar.add_task(self._count(), total=total)

    def now(self, words: str) -> Report:
        """Progress of the job that is being worked on; `words` say which."""
        return lambda stage, fraction: self._show(f"{words}: {stage}", _part(stage, fraction))

    def note(self, words: str) -> None:
        """Something that holds everything up."""
        if self._bar is None:
            print(words, file=sys.stderr, flush=True)
        self._show(words)

    def _show(self, words: str, part: float = 0.0) -> None:
        if self._bar is not None:
            self._bar.update(
                self._task,
                description=f"{self._count()}  {escape(words)}",
                completed=self._done + part,
            )

    def done(self, words: str) -> None:
        """One more is done; `words` say which and how it went."""
        self._done += 1
        if self._bar is None:
            print(f"{self._count()}  {words}", file=sys.stderr, flush=True)
        else:
            self._bar.update(self._task, description=self._count(), completed=self._done)

    def _count(self) -> str:
        return f"{self._done} of {self._total}"


@contextmanager
def progress_of_many(total: int) -> Iterator[Many]:
    """Shows how far many jobs are."""
    console = err()
    if console.is_terminal:
        with _bar(console, TimeRemainingColumn()) as bar:
            yield Many(total, bar)
    else:
        yield Many(total, None)


def _bar(console: Console, *more: ProgressColumn) -> Progress:
    """A bar that is gone when all is done."""
    return Progress(
        BarColumn(bar_width=24),
        TextColumn("{task.percentage:>3.0f}%"),
        *(more or (TimeElapsedColumn(),)),
        TextColumn("{task.description}", table_column=Column(no_wrap=True, overflow="ellipsis")),
        console=console,
        transient=True,
    )


def _part(stage: str, fraction: float) -> float:
    """How much of a job is done, if all stages were alike."""
    return (STAGES.index(stage) + fraction) / len(STAGES) if stage in STAGES else 0.0


def _lines() -> Report:
    last = ""

    def report(stage: str, _fraction: float) -> None:
        nonlocal last
        if stage != last:  # one line for each stage is enough for a log
            last = stage
            print(stage, file=sys.stderr, flush=True)

    return report


def print_faults(message: str, faults: Iterable[Mapping[str, Any]]) -> None:
    """What is wrong, then where and what in particular, one fault a line."""
    console = err()
    console.print(f"[bold red]{escape(message)}[/bold red]", soft_wrap=True)
    for fault in faults:
        place = fault.get("pointer", fault.get("parameter", "")) or "(document)"
        console.print(f"  [bold]{escape(place)}[/bold]  {escape(str(fault['message']))}",
                      soft_wrap=True)  # fmt: skip


def leave(status: int, message: str, faults: Iterable[Mapping[str, Any]] = ()) -> NoReturn:
    """Say why on standard error and end with the status."""
    print_faults(message, faults)
    click.get_current_context().exit(status)
