"""CSV that a spreadsheet takes as data."""

import csv
import io

import pytest
from hypothesis import given
from hypothesis import strategies as st

from tests.job_strategies import NAME
from workers.outputs.csv_text import csv_text, inert


@pytest.mark.parametrize("name", ["=A1+A2", "+A1", "-A1", "@SUM", "=1", "-15 deg", "+1-2", "\t=1"])
def test_a_name_that_begins_like_a_formula_becomes_text(name: str) -> None:
    """An apostrophe before the cell makes it text to a spreadsheet (OWASP, "CSV injection")."""
    assert inert(name) == f"'{name}"


@pytest.mark.parametrize("cell", ["-15", "+1.5e-3", "-.5", "lift", "15 = x", "", 3, -3.5, None])
def test_numbers_and_other_names_stay_as_they_are(cell: object) -> None:
    assert inert(cell) == cell


def test_a_cell_is_made_inert_once() -> None:
    assert inert(inert("=A1")) == "'=A1"


@given(st.lists(st.tuples(NAME, st.floats(allow_nan=False, allow_infinity=False)), min_size=1))
def test_rows_read_back_exactly(rows: list[tuple[str, float]]) -> None:
    """Oracle: Python's own CSV reader; lines end with CRLF (RFC 4180, 2.1)."""
    text = csv_text(rows)
    assert text.endswith("\r\n")
    back = list(csv.reader(io.StringIO(text, newline="")))
    assert [(name.removeprefix("'"), float(value)) for name, value in back] == rows
