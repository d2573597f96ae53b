"""The verification record as one page of HTML, to print and to file with the installation.

The page needs no script and nothing from elsewhere.
"""

from jinja2 import Environment, PackageLoader, StrictUndefined

from workers.cautions import STANDING
from workers.verification.case import Check
from workers.verification.record import Record


def render_page(record: Record) -> str:
    """The record as HTML."""
    environment = Environment(
        loader=PackageLoader("workers.verification", ""),
        autoescape=True,
        undefined=StrictUndefined,
        trim_blocks=True,
        lstrip_blocks=True,
    )
    environment.filters |= {"figure": figure, "part": part, "tolerance": tolerance}
    return environment.get_template("page.html").render(record=record, cautions=STANDING)


def figure(value: float) -> str:
    """Six digits: enough to see every deviation that a tolerance here is about."""
    return f"{value:.6g}"


def part(check: Check) -> str:
    """The deviation: in percent of its scale, as a number where the scale is one, or as a power of
    ten where it is rounding.
    """
    deviation = check.deviation
    if deviation == 0:
        return "0"
    if abs(deviation) < 5e-5:
        return f"{deviation:+.0e}"
    return f"{deviation:+.4f}" if check.scale == 1 else f"{deviation:+.2%}"


def tolerance(check: Check) -> str:
    if check.tolerance is None:
        return "reported only"
    limit = check.tolerance
    return f"{limit:.3g}" if limit < 1e-4 or check.scale == 1 else f"{limit * 100:.3g} %"
