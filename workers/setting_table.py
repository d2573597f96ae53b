"""The settings as a table for people: `deploy/SETTINGS.md` is written by this module.

python -m workers.setting_table > deploy/SETTINGS.md
"""

import sys
import textwrap
from dataclasses import MISSING, Field, fields
from typing import Any

from workers.settings import GIBIBYTE, PREFIX, Settings, variable

INTRODUCTION = f"""\
# Settings

Environment variables, read at the start of `fishplate serve` and `fishplate work`. A name beginning
with `{PREFIX}` that is not in this table is an error, so that a misspelt limit does not pass. Sizes
may have a unit: `64MiB`, `4GiB`. Written by `python -m workers.setting_table`.

| variable | default | meaning |
|---|---|---|
"""
HELP_WIDTH = 76  # columns; click indents by two, and a terminal has 80
_UNITS = ((GIBIBYTE, "GiB"), (1024**2, "MiB"))


def rows() -> list[tuple[str, str, str]]:
    """(variable, default, meaning) of every setting."""
    return [(variable(s.name), _default(s), s.metadata["meaning"]) for s in fields(Settings)]


def _default(setting: "Field[Any]") -> str:
    """The default in words."""
    if text := setting.metadata["default_text"]:
        return str(text)
    value = setting.default
    if value is None or value is MISSING:
        return "none"
    if setting.name.endswith("_bytes"):
        unit, name = next((u, n) for u, n in _UNITS if value % u == 0)
        return f"{value // unit}{name}"
    return f"{value:g}" if isinstance(value, float) else str(value)


def as_markdown() -> str:
    """The whole page."""
    lines = [f"| `{name}` | {default} | {meaning} |\n" for name, default, meaning in rows()]
    return INTRODUCTION + "".join(lines)


def as_help() -> str:
    """Names and defaults for the help of a command; click keeps lines after `\\b` as they are."""
    width = max(len(name) for name, _, _ in rows())
    later = " " * (width + 4)
    lines = [
        textwrap.fill(
            f"  {name:<{width}}  {default}", HELP_WIDTH, subsequent_indent=later,
            break_on_hyphens=False,
        )
        for name, default, _ in rows()
    ]  # fmt: skip
    return "\n".join(["\b", "Environment variables and their defaults:", *lines])


if __name__ == "__main__":
    sys.stdout.write(as_markdown())
