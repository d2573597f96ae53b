"""CSV text (RFC 4180) that a spreadsheet takes as data, whatever names a client has chosen."""

import csv
import io
import re
from collections.abc import Iterable, Sequence
from typing import Any

# A cell that begins so is a formula to a spreadsheet, unless it is nothing but a number.
_FORMULA = re.compile(r"[=+\-@\t\r]")
_NUMBER = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?")


def csv_text(rows: Iterable[Sequence[Any]]) -> str:
    """Rows as text; numbers are written so that they read back exactly."""
    text = io.StringIO(newline="")
    csv.writer(text).writerows([inert(cell) for cell in row] for row in rows)
    return text.getvalue()


def inert(cell: Any) -> Any:
    """A name that begins like a formula gets an apostrophe, which makes it text."""
    if isinstance(cell, str) and _FORMULA.match(cell) and not _NUMBER.fullmatch(cell):
        return f"'{cell}"
    return cell
