"""The review sheet: one page of HTML that tells a job to the engineer who checks and files it.

Made from the job, its results and the files in their folder alone. The page needs no script and
nothing from elsewhere: pictures are in it as data URIs, plots as inline SVG. Every text of the
client's goes through the template's escaping.
"""

from collections import Counter
from collections.abc import Iterable, Mapping
from pathlib import Path
from typing import Any

from jinja2 import Environment, FileSystemLoader, StrictUndefined

from workers.analysis.combine import factors_of
from workers.cautions import SEVERITIES
from workers.job import Job
from workers.outputs import wording
from workers.outputs.assumptions import assumptions
from workers.outputs.drawing import numbers
from workers.outputs.drawing.numbers import NO_BREAK
from workers.outputs.leading import (
    all_states,
    governing_states,
    reaction_extremes,
    worth_a_row,
)
from workers.outputs.names import SHEET
from workers.outputs.rounding import settle
from workers.outputs.shape_words import shape_rows
from workers.outputs.sheet_parts import (
    MOST_ROWS,
    convergence_plot,
    cut_parts,
    line_parts,
    peak_plot,
)
from workers.outputs.sheet_pictures import find_picture, find_pictures

Json = Mapping[str, Any]

DIGITS = 4  # more than any of these numbers can be trusted for
MOST_PEAKS = 24  # states with a row of their own; more are listed in small print
MOST_REACTIONS = 30  # rows; for more, those of the governing states and the extremes
MOST_LISTED = 900  # states in the small print; further ones are in the table files
MOST_LOAD_CASES = 24  # whose loads are told; of more, those of the governing states
MOST_ERRORS = 5  # states whose error estimate is shown, the largest first
MOST_EVIDENCE = 6  # entries of a list in the evidence of a caution


def warm_up() -> None:
    """Compile the templates, which takes longer than a small job: once, not in each process."""
    for name in _ENVIRONMENT.list_templates():
        _ENVIRONMENT.get_template(name)


def render_sheet(job: Job, results: Json, folder: Path) -> str:
    """The sheet of a finished job as HTML.

    folder : of the results; pictures that are not in it are missing on the sheet, which says so
    """
    results = settle(job, results)
    states = all_states(results)
    governing = results["envelope"]["von_mises"]["governs"]
    governed = governing_states(results)
    leading = worth_a_row(results, MOST_PEAKS)
    few_reactions = len(states) * len(job.supports) <= MOST_REACTIONS
    return _ENVIRONMENT.get_template(SHEET).render(
        job=job,
        results=results,
        units=job.units,
        states=states,
        governing=governing,
        governed=governed,
        leading=leading,
        others=[name for name in states if name not in leading][:MOST_LISTED],
        left_out=max(0, len(states) - len(leading) - MOST_LISTED),
        shape=shape_rows(job),
        told_cases=told_cases(job, governed),
        told_sums=[
            one
            for one in (*job.cases, *job.combinations)
            if len(states) <= MOST_PEAKS or one.name in governed
        ],
        used_materials={region["material"] for region in results["mesh"]["regions"].values()},
        worst_errors=sorted(states, key=lambda name: -relative_error(states[name]))[:MOST_ERRORS],
        has_singular=any(state["von_mises"]["singular"] for state in states.values()),
        cautions=sorted_cautions(results),
        counts=Counter(caution["severity"] for caution in results["cautions"]),
        severities=SEVERITIES,
        pictures=find_pictures(folder, governing),
        governing_picture=find_picture(folder / "envelope" / "von_mises.png"),
        peak_plot=peak_plot(job, results) if len(states) > MOST_PEAKS else None,
        balanced=worth_a_row(results, MOST_ROWS),
        worst_balance=max(states, key=lambda name: states[name]["equilibrium"]["residual"]),
        reacting=list(states) if few_reactions else list(governed),
        extreme_reactions=[] if few_reactions else reaction_extremes(results),
        cuts=cut_parts(job, results),
        lines=line_parts(job, results),
        convergence_plot=convergence_plot(job, results),
        assumptions=assumptions(job),
    )


def write_sheet(job: Job, results: Json, folder: Path, target: Path) -> Path:
    """Write the sheet of the results in `folder` into the target folder; returns its path."""
    path = target / SHEET
    path.write_text(render_sheet(job, results, folder), encoding="utf-8")
    return path


# --- what is on it -------------------------------------------------------------------------------


def sorted_cautions(results: Json) -> list[Json]:
    """The gravest first; within a severity in their order."""
    order = list(SEVERITIES)
    return sorted(results["cautions"], key=lambda caution: order.index(caution["severity"]))


def relative_error(state: Json) -> float:
    return float(state["error_estimate"]["relative"])


def told_cases(job: Job, governing: Iterable[str]) -> list[str]:
    """Load cases whose loads are told: all, or of many those that take part in what governs."""
    names = [case.name for case in job.load_cases]
    if len(names) <= MOST_LOAD_CASES:
        return names
    needed = {case for state in governing for case in factors_of(job, state)}
    return [name for name in names if name in needed]


# --- how it is written ---------------------------------------------------------------------------


def number(value: float, digits: int = DIGITS) -> str:
    return numbers.show(value, digits)


def place(at: Any) -> str:
    x, y = at
    return numbers.vector(x, y, DIGITS)


def percent(value: float) -> str:
    digits = 0 if value >= 0.1 else 1
    return f"{100 * value:.{digits}f}{NO_BREAK}%"


def moment(text: str) -> str:
    """A time as a reader wants it: "2031-04-05T06:07:08.910Z" to "2031-04-05 06:07 UTC"."""
    return f"{text[:10]} {text[11:16]} UTC"


def evidence_words(evidence: Json) -> str:
    """The facts of a caution on one line, e.g. "value 412.3 · limit 355 · at (12, 40)"."""
    told = {**evidence}
    if isinstance(told.get("quantity"), str):  # a key of the results, such as "factor_on_yield"
        told["quantity"] = told["quantity"].replace("_", " ")
    return " · ".join(f"{key.replace('_', ' ')} {_fact(value)}" for key, value in told.items())


def _fact(value: Any) -> str:
    if isinstance(value, bool) or not isinstance(value, int | float | list | dict):
        return str(value)
    if isinstance(value, int | float):
        return number(value)
    if isinstance(value, dict):
        return ", ".join(f"{key} {_fact(part)}" for key, part in value.items())
    if len(value) == 2 and all(isinstance(part, int | float) for part in value):
        return place(value)
    more = f" and {len(value) - MOST_EVIDENCE} more" if len(value) > MOST_EVIDENCE else ""
    return ", ".join(_fact(part) for part in value[:MOST_EVIDENCE]) + more


def css_string(text: str) -> str:
    """Text for between quotes in a style sheet: all but plain letters and digits as escapes."""
    # Isolated, so that a title in right-to-left script does not turn around what follows it.
    isolated = f"\N{FIRST STRONG ISOLATE}{text}\N{POP DIRECTIONAL ISOLATE}"
    return "".join(c if c.isascii() and c.isalnum() else f"\\{ord(c):06x}" for c in isolated)


def _environment() -> Environment:
    environment = Environment(
        loader=FileSystemLoader(Path(__file__).parent / "templates"),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    environment.filters |= {
        "number": number,
        "place": place,
        "moment": moment,
        "percent": percent,
        "evidence": evidence_words,
        "css_string": css_string,
    }
    environment.globals |= {"words": wording}
    return environment


_ENVIRONMENT = _environment()
