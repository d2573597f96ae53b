"""What became of each of several jobs, as a table, and the exit status of them all."""

import json
from collections import Counter
from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Any

from rich.console import Console

from api.commands.documents import Document
from api.commands.layout import number, print_cautions, print_table
from api.commands.terminal import BAD_INPUT, FAILED, print_faults
from workers.cautions import STANDING
from workers.record import FINISHED, UNFINISHED

WRONG = "wrong"  # the document; nothing was solved
NOT_BEGUN = "not begun"
MOST_FAULTS = 5  # that are shown of one document; `fishplate check` shows all

Json = Mapping[str, Any]


@dataclass(frozen=True)
class Outcome:
    """state : of the job, or `wrong`; envelope, cautions : of the results, where there are any."""

    document: Document
    state: str
    title: str = ""
    reason: str = ""
    faults: Sequence[Json] = ()
    unit: str = ""
    envelope: Json = field(default_factory=dict)
    cautions: Sequence[Json] = ()

    @property
    def utilisation(self) -> float | None:
        """Of yield; None where it is not known."""
        use = self.envelope.get("utilisation")
        return None if use is None else use["value"]

    def in_words(self) -> str:
        """One line for a log."""
        words = [self.document.name, self.state]
        if self.envelope:
            words.append(self._peak())
            words.append("" if self.utilisation is None else f"{self.utilisation:.0%} of yield")
            words.append(self._cautions())
        return "  ".join(filter(None, [*words, self.reason]))

    def row(self) -> tuple[str, ...]:
        """Cells of the table."""
        if not self.envelope:
            return self.document.name, self.title, "-", "-", "-", "-", self.state
        peak, use = self.envelope["von_mises"], self.utilisation
        error = peak["error"]
        return (
            self.document.name,
            self.title,
            self._peak(),
            "-" if error is None or not peak["value"] else f"± {error / peak['value']:.1%}",
            "-" if use is None else f"{use:.0%}",
            self._cautions() or "-",
            self.state,
        )

    def _peak(self) -> str:
        return f"{number(self.envelope['von_mises']['value'])} {self.unit}"

    def _cautions(self) -> str:
        """How many stop or must be decided on; the notes are left to the sheet."""
        counts = Counter(caution["severity"] for caution in self.cautions)
        return ", ".join(f"{counts[s]} {s}" for s in ("stop", "check") if counts[s])


def finished(document: Document, results: Json) -> Outcome:
    """The outcome of a job that has results."""
    return Outcome(
        document,
        FINISHED,
        results["job"]["title"],
        unit=results["units"]["stress"],
        envelope=results["envelope"],
        cautions=results["cautions"],
    )


def title_of(document: bytes) -> str:
    """The title of a document that may be wrong in every way."""
    try:
        content = json.loads(document)
    except (ValueError, RecursionError):
        return ""
    title = content.get("title") if isinstance(content, dict) else None
    return title if isinstance(title, str) else ""


def print_outcomes(console: Console, outcomes: Sequence[Outcome]) -> None:
    """The gravest cautions and the standing ones, then a line for each job."""
    print_cautions(console, [*_stops(outcomes), *(caution.as_json() for caution in STANDING)])
    print_table(
        console,
        "Jobs",
        ("job", "title", "von Mises", "doubt", "of yield", "cautions", "state"),
        (outcome.row() for outcome in outcomes),
        words=2,
        cut="title",
    )
    console.print(f"\n{_totals(outcomes)}")


def print_troubles(outcomes: Iterable[Outcome]) -> None:
    """On standard error: why jobs have no results."""
    for outcome in outcomes:
        if outcome.reason or outcome.faults:
            more = len(outcome.faults) - MOST_FAULTS
            rest = f" The first {MOST_FAULTS} of {len(outcome.faults)} faults:" if more > 0 else ""
            print_faults(
                f"{outcome.document.path}: {outcome.reason or outcome.state}{rest}",
                outcome.faults[:MOST_FAULTS],
            )


def _stops(outcomes: Iterable[Outcome]) -> Iterator[Json]:
    """What forbids to use a result, with the name of the job."""
    for outcome in outcomes:
        for caution in outcome.cautions:
            if caution["severity"] == "stop":
                yield {**caution, "message": f"{outcome.document.name}: {caution['message']}"}


def _totals(outcomes: Sequence[Outcome]) -> str:
    counts = Counter(outcome.state for outcome in outcomes)
    words = ", ".join(f"{count} {state}" for state, count in counts.items())
    used = [(o.utilisation, o.document.name) for o in outcomes if o.utilisation is not None]
    worst = f"; the highest use of yield is {max(used)[0]:.0%}, in {max(used)[1]}" if used else ""
    return f"{len(outcomes)} job{'s' if len(outcomes) != 1 else ''}: {words}{worst}"


def exit_status(outcomes: Iterable[Outcome]) -> int:
    """0 where all went well, 1 where a job failed, 2 where no more is wrong than documents."""
    states = {outcome.state for outcome in outcomes} - {FINISHED, *UNFINISHED}
    if not states:
        return 0
    return BAD_INPUT if states == {WRONG} else FAILED
