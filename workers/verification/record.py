"""The record of one verification: every case run here and now, on this machine.

A case that breaks down is a row that failed, with the reason; nothing is left out.
"""

import platform
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from datetime import UTC, datetime
from importlib.metadata import version

from threadpoolctl import threadpool_limits

from workers.analysis.solver import MULTIFRONTAL
from workers.verification.case import Case, Check
from workers.verification.catalogue import CASES

PACKAGES = ("fishplate", "numpy", "scipy", "pymetis", "netgen-mesher", "shapely", "vtk")


@dataclass(frozen=True)
class Row:
    """One line of the table: a check, or why there is none.

    passed : None where the number is only reported
    """

    check: Check | None
    passed: bool | None
    trouble: str = ""


@dataclass(frozen=True)
class CaseRecord:
    """A case with its rows."""

    group: str
    case: Case
    rows: tuple[Row, ...]
    seconds: float

    @property
    def failed(self) -> int:
        return sum(row.passed is False for row in self.rows)


@dataclass(frozen=True)
class Record:
    """All cases, and where and with what they were run.

    when : in UTC
    """

    when: datetime
    machine: Mapping[str, str]
    versions: Mapping[str, str]
    cases: tuple[CaseRecord, ...]

    @property
    def groups(self) -> dict[str, list[CaseRecord]]:
        """Cases by group, in the order in which they were run."""
        found: dict[str, list[CaseRecord]] = {}
        for case in self.cases:
            found.setdefault(case.group, []).append(case)
        return found

    @property
    def failed(self) -> int:
        return sum(case.failed for case in self.cases)

    @property
    def passed(self) -> int:
        return sum(row.passed is True for case in self.cases for row in case.rows)

    @property
    def seconds(self) -> float:
        return sum(case.seconds for case in self.cases)


def verify(report: Callable[[CaseRecord], None], wanted: str = "") -> Record:
    """Run the cases and say of each what came out.

    wanted : a part of the names of the cases to run; all if empty
    """
    done = []
    for group, cases in CASES.items():
        for case in cases:
            if wanted.lower() in case.name.lower():
                done.append(run_case(group, case))
                report(done[-1])
    return Record(datetime.now(UTC), _machine(), _versions(), tuple(done))


def run_case(group: str, case: Case) -> CaseRecord:
    begun = datetime.now(UTC)
    with threadpool_limits(1):  # as in a worker
        rows = tuple(_rows(case))
    return CaseRecord(group, case, rows, (datetime.now(UTC) - begun).total_seconds())


def _rows(case: Case) -> Iterator[Row]:
    found = False
    try:
        for check in case.checks():
            found = True
            yield Row(check, check.passed)
    except Exception as error:  # noqa: BLE001  whatever goes wrong is a failure of this case
        yield Row(None, False, f"broke down: {type(error).__name__}: {error}")
    else:
        if not found:
            yield Row(None, False, "checked nothing")


def _machine() -> dict[str, str]:
    return {
        "system": platform.platform(),
        "processor": platform.machine(),
        "Python": platform.python_version(),
    }


def _versions() -> dict[str, str]:
    return {**{name: version(name) for name in PACKAGES}, "solver": MULTIFRONTAL}
