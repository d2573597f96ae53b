"""All figures of a run once more at its end, as a table for DEVELOPERS.md."""

from typing import Any

from tests.measuring import rows, table


def pytest_terminal_summary(terminalreporter: Any) -> None:
    if rows:
        terminalreporter.section("benchmarks")
        for line in table():
            terminalreporter.write_line(line)
