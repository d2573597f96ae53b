"""A batch: the jobs of one label. How far they are, and the worst of all that are finished.

Works on records alone, so that the web process can tell at once. What is joint at every node is
made by a worker, see `batch_envelope.py`.
"""

import hashlib
from collections import Counter
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass
from functools import cached_property
from pathlib import Path
from typing import Any

from workers.analysis.envelope import WORST
from workers.cautions import SEVERITIES
from workers.record import FINISHED, STATES, Record
from workers.store_reader import StoreReader

Json = dict[str, Any]

PAGE = 200  # records read at a time
MEASURES: Mapping[str, int] = {**WORST, "utilisation": 1}


def outcome_of(results: Mapping[str, Any]) -> Json:
    """What the record of a job keeps of its results for its batch."""
    return {
        "units": results["units"],
        "mesh": results["mesh"].get("digest"),
        "envelope": results["envelope"],
    }


def read_batch(store: StoreReader, label: str, workspace: str | None) -> "Batch":
    """All jobs of a label, the oldest first.

    workspace : whose jobs; None for those of all.
    """
    records: list[Record] = []
    after = None
    while True:
        page = store.list(label=label, workspace=workspace, after=after, limit=PAGE)
        records.extend(page.records)
        after = page.after
        if after is None:
            return Batch(label, workspace, tuple(reversed(records)))


@dataclass(frozen=True)
class Batch:
    """records : oldest first."""

    label: str
    workspace: str | None
    records: tuple[Record, ...]

    @property
    def counts(self) -> dict[str, int]:
        """Number of jobs in each state."""
        found = Counter(record.state for record in self.records)
        return {state: found[state] for state in STATES}

    @cached_property
    def finished(self) -> tuple[Record, ...]:
        """The jobs that have results to compare."""
        return tuple(r for r in self.records if r.state == FINISHED and r.outcome is not None)

    @property
    def meshes(self) -> int:
        """How many different meshes, or systems of units, the finished jobs have."""
        return len({_kind(record) for record in self.finished})

    @property
    def digest(self) -> str:
        """Stands for the set of finished jobs."""
        ids = "".join(record.id for record in self.finished)
        return hashlib.sha256(ids.encode()).hexdigest()[:32]

    def folder(self, root: Path) -> Path:
        """Where the joint files of the finished jobs are kept in the store."""
        return batch_folder(root, self.label) / (self.workspace or "all") / self.digest

    def file(self, root: Path, kind: str) -> Path:
        """Where a joint file is, or will be; KeyError if there is no such file."""
        if kind in WORST:
            return self.folder(root) / f"{kind}.png"
        return self.folder(root) / {"fields": "fields.vtu", "nodes": "nodes.csv"}[kind]

    def envelopes(self) -> Iterator[Json]:
        """The worst of all finished jobs, for each system of units: what cannot be compared is not.

        By measure the peak as in the results of its job, with `governs`: job, title and case.
        """
        groups: dict[tuple[str, ...], list[Record]] = {}
        for record in self.finished:
            groups.setdefault(_units(record), []).append(record)
        for records in groups.values():
            worst = {name: _worst(records, name, sign) for name, sign in MEASURES.items()}
            yield {"units": _outcome(records[0])["units"], "jobs": len(records), **worst}

    def cautions(self) -> list[Json]:
        """One caution of each code, the gravest, with its job and how many jobs raise it."""
        order = list(SEVERITIES)
        found: dict[str, tuple[Json, Record, int]] = {}
        for record in self.records:
            for code, caution in _by_code(record.cautions).items():
                gravest, owner, count = found.get(code, (caution, record, 0))
                if order.index(caution["severity"]) < order.index(gravest["severity"]):
                    gravest, owner = caution, record
                found[code] = (gravest, owner, count + 1)
        cautions = [
            {**caution, "evidence": {**caution["evidence"], "job": owner.id, "jobs": count}}
            for caution, owner, count in found.values()
        ]
        return sorted(cautions, key=lambda caution: order.index(caution["severity"]))


def batch_folder(root: Path, label: str) -> Path:
    """Where everything joint of a label is kept."""
    return root / "batches" / hashlib.sha256(label.encode()).hexdigest()[:32]


def _by_code(cautions: Iterable[Mapping[str, Any]]) -> dict[str, Json]:
    """The first caution of each code: cautions come the gravest first."""
    found: dict[str, Json] = {}
    for caution in cautions:
        found.setdefault(caution["code"], dict(caution))
    return found


def _worst(records: list[Record], measure: str, sign: int) -> Json | None:
    """The worst peak of a measure, None where no job has one."""
    peaks = [(r, _outcome(r)["envelope"].get(measure)) for r in records]
    stated = [(r, peak) for r, peak in peaks if peak is not None and peak["value"] is not None]
    if not stated:
        return None
    record, peak = max(stated, key=lambda pair: sign * pair[1]["value"])
    governs = {"job": record.id, "title": record.title, "case": peak["governs"]}
    return {"value": peak["value"], "at": peak["at"], "region": peak["region"], "governs": governs}


def _outcome(record: Record) -> Mapping[str, Any]:
    assert record.outcome is not None
    return record.outcome


def _units(record: Record) -> tuple[str, ...]:
    return tuple(_outcome(record)["units"].values())


def _kind(record: Record) -> tuple[str, ...]:
    """What jobs must share to be compared node by node; a mesh that is not known is no other's."""
    return (_outcome(record)["mesh"] or record.id, *_units(record))
