"""A table of factors as CSV (RFC 4180): a case in each row, a load case in each column.

    case,pull x,pull y
    rope 1,0.8,0.6

The heading of the first column is free. An empty cell leaves that load case out. Faults are told by
line and column, both from 1.
"""

import csv
import io
from collections.abc import Iterator
from dataclasses import dataclass, field

from workers.document.faults import seen
from workers.document.fields import LARGEST, NAME_RULE, is_name

BYTE_ORDER_MARK = "\ufeff"  # what spreadsheets put before UTF-8


@dataclass
class FactorTable:
    """What a table says.

    heading : of the column of names
    patterns : column, counted from 1, of each load case named in the heading
    cases : factors by load case, by case
    faults : one sentence each
    """

    heading: str = ""
    patterns: dict[str, int] = field(default_factory=dict)
    cases: dict[str, dict[str, float]] = field(default_factory=dict)
    faults: list[str] = field(default_factory=list)


def read_table(text: str) -> FactorTable:
    """Read a table as far as it can be read."""
    table = FactorTable()
    reader = csv.reader(io.StringIO(text.removeprefix(BYTE_ORDER_MARK), newline=""), strict=True)
    try:
        heading = next(reader, [])
        table.faults.extend(_read_heading(table, heading))
        if table.faults:
            return table
        lines: dict[str, int] = {}
        last = reader.line_num
        for row in reader:
            line, last = last + 1, reader.line_num
            if row:
                table.faults.extend(_read_row(table, row, line, lines))
    except csv.Error as error:
        table.faults.append(f"line {reader.line_num} is not CSV: {error}")
    if not (table.faults or table.cases):
        table.faults.append("needs a line for each case below the heading")
    return table


def _read_heading(table: FactorTable, heading: list[str]) -> Iterator[str]:
    if len(heading) < 2:
        yield (
            "line 1 must be a heading, with commas between: one column for the names of the cases "
            'and one for each load case, such as "case,pull x,pull y"'
        )
    table.heading = heading[0] if heading else ""
    for column, name in enumerate(heading[1:], start=2):
        if not name:
            yield f"line 1, column {column}: the name of a load case is missing"
        elif name in table.patterns:
            yield f"line 1, column {column}: {seen(name)} is already column {table.patterns[name]}"
        else:
            table.patterns[name] = column


def _read_row(
    table: FactorTable, row: list[str], line: int, lines: dict[str, int]
) -> Iterator[str]:
    """Take in one row; `lines` remembers where each case stands."""
    name, cells = row[0], row[1:]
    if len(cells) != len(table.patterns):
        yield f"line {line} has {len(row)} columns; the heading has {1 + len(table.patterns)}"
        return
    if not is_name(name):
        yield f"line {line}, column 1: {seen(name)} is not a name: {NAME_RULE}"
        return
    if name in lines:
        yield f"line {line}, column 1: {seen(name)} stands in line {lines[name]} already"
        return
    lines[name] = line
    factors = {}
    for (pattern, column), cell in zip(table.patterns.items(), cells, strict=True):
        if not cell.strip():
            continue
        factor = _number(cell)
        if factor is None:
            yield (
                f"line {line}, column {column} ({pattern}): {seen(cell)} is not a finite number "
                f"with a decimal point, of at most {LARGEST:g} in size"
            )
            return
        factors[pattern] = factor
    if not factors:
        yield f"line {line}: {seen(name)} has no factor"
    table.cases[name] = factors


def _number(cell: str) -> float | None:
    """A number as JSON would have it, a plus sign and blanks around it allowed."""
    if not set(cell.strip()) <= set("0123456789+-.eE"):  # float() takes "nan" and "1_000" as well
        return None
    try:
        number = float(cell)
    except ValueError:
        return None
    return number if abs(number) <= LARGEST else None
