"""The joint envelope of jobs on the same mesh: at every node the worst of all their states.

Formed from the stored displacements, or from the envelopes that jobs of many states have kept.
Jobs of the same model share their stress recovery and go through it in blocks of states.
"""

from collections.abc import Iterator, Sequence
from dataclasses import dataclass, replace
from pathlib import Path
from tempfile import TemporaryDirectory

import numpy as np
import orjson
from numpy.typing import NDArray

from workers import pipeline
from workers.analysis.combine import superpose, superpose_blocks
from workers.analysis.envelope import Envelope, measures
from workers.analysis.field_mesh import FieldMesh
from workers.analysis.mesh import Mesh
from workers.analysis.recovery import Temperature
from workers.analysis.summary import states_at_once
from workers.batch import Batch
from workers.cautions import Caution
from workers.errors import Fault, MeshError
from workers.filing import Work
from workers.job import Job
from workers.outputs import preview, vtu
from workers.outputs.envelope_table import write_envelope_table
from workers.record import Record
from workers.store import Store

Array = NDArray[np.float64]

ENVELOPE, STATES = "envelope.npz", "states.json"


@dataclass(frozen=True, eq=False)
class Joint:
    """The joint envelope of a batch.

    job : one of the jobs, for units and regions, under the name of the batch
    states : name of each state that the envelope counts, with its job; short: without
    """

    job: Job
    field_mesh: FieldMesh
    envelope: Envelope
    states: tuple[str, ...]
    short: tuple[str, ...]


def form_joint(store: Store, batch: Batch, kept: Path) -> Joint:
    """The joint envelope of the finished jobs.

    kept : a folder; the envelope is left there, or found there if it was left

    Raises
    ------
    MeshError   they do not have the same mesh and units, or none is finished.
    """
    if batch.meshes != 1:
        raise MeshError([Fault("", f"the finished jobs have {batch.meshes} different meshes")])
    records = sorted(batch.finished, key=lambda r: (r.model or r.id, r.id))
    forming = _Forming(store, records[0])
    if (kept / STATES).exists():
        forming.recall(kept)
    else:
        for record in records:
            forming.add(record)
        forming.flush()
        forming.leave(kept)
    short = tuple(state for state, _ in forming.states)
    states = tuple(f"{state} ({job_id})" for state, job_id in forming.states)
    return Joint(
        job=replace(forming.job, title=f"Batch {batch.label}"),
        field_mesh=forming.field_mesh,
        envelope=forming.envelope,
        states=states,
        short=short if len({*short}) == len(short) else states,
    )


def write_joint(joint: Joint, batch: Batch, kind: str, path: Path) -> None:
    """Write one file of a joint envelope.

    kind : "fields" (VTK), "nodes" (the table), or a measure: the picture of what governs where

    Raises
    ------
    KeyError                   there is no such file.
    PicturesUnavailableError   this machine cannot render; the message says why.
    """
    cautions = [Caution(**caution) for caution in batch.cautions()]
    job, mesh, envelope = joint.job, joint.field_mesh, joint.envelope
    if kind == "fields":
        vtu.write_envelope(path, job, mesh, envelope, joint.states, cautions)
    elif kind == "nodes":
        text = write_envelope_table(mesh, job.units, envelope, joint.states)
        path.write_bytes(text.encode())
    else:
        (found,) = batch.envelopes()
        peak = found[kind]
        if peak is not None:
            peak = {**peak, "governs": peak["governs"]["case"]}
        preview.render_governing(
            path, job, mesh, envelope.state[kind], kind, joint.short, peak, cautions=cautions
        )


class _Forming:
    """Takes in job after job; states of one model wait until there are enough for a block."""

    def __init__(self, store: Store, first: Record) -> None:
        self._store = store
        work = self._open(first, None)
        self.job, self._mesh = work.job, work.model.mesh
        self._recovery, self._model = work.recovery, first.model
        self.envelope = Envelope()
        self.states: list[tuple[str, str]] = []  # and their jobs
        self._waiting: list[tuple[Array, Temperature]] = []

    @property
    def field_mesh(self) -> FieldMesh:
        return self._recovery.field_mesh

    def _open(self, record: Record, mesh: Mesh | None) -> Work:
        return pipeline.reopen(self._store.results_path(record.id), mesh).work

    def add(self, record: Record) -> None:
        # The nodes of another model are the same, the names of its sides may be others.
        same = record.model is not None and record.model == self._model
        work = self._open(record, self._mesh if same else None)
        if not same or work.formed is not None:
            self.flush()
        if not same:
            # The operator follows from the mesh, the stress at its samples from the model.
            self._recovery = replace(self._recovery, model=work.model)
            self._model, self._mesh = record.model, work.model.mesh
        if work.formed is not None:
            self.envelope.merge(work.formed, len(self.states))
        else:
            self._waiting += _columns(work)
        self.states += [(name, record.id) for name in work.states.names]
        if len(self._waiting) >= states_at_once(self._recovery):
            self.flush()

    def leave(self, folder: Path) -> None:
        """Keep what was formed in a folder, each file whole or not at all; the names come last."""
        with TemporaryDirectory(dir=folder) as scratch:
            np.savez(Path(scratch) / ENVELOPE, **self.envelope.arrays())
            (Path(scratch) / STATES).write_bytes(orjson.dumps(self.states))
            for name in (ENVELOPE, STATES):
                (Path(scratch) / name).replace(folder / name)

    def recall(self, folder: Path) -> None:
        """Take what was kept."""
        with np.load(folder / ENVELOPE, allow_pickle=False) as arrays:
            self.envelope = Envelope.from_arrays(arrays)
        self.states = [tuple(state) for state in orjson.loads((folder / STATES).read_bytes())]

    def flush(self) -> None:
        """Take in the states that wait; they are the last ones."""
        if self._waiting:
            displacement = np.concatenate([u for u, _ in self._waiting], axis=2)
            temperature = _joined([t for _, t in self._waiting])
            stress = self._recovery.nodal_stress(displacement, temperature)
            values = measures(displacement[self.field_mesh.origin], stress)
            count = len(self.states)
            self.envelope.include(range(count - displacement.shape[2], count), values)
        self._waiting = []


def _columns(work: Work) -> Iterator[tuple[Array, Temperature]]:
    """Displacement (N, 2, 1) and temperature changes of each state."""
    for column in range(len(work.states)):
        one = range(column, column + 1)
        yield (
            superpose(work.displacement, work.states, one),
            superpose_blocks(work.temperature, work.states, one),
        )


def _joined(temperatures: Sequence[Temperature]) -> Temperature:
    """Of several states side by side; zero where a state has none."""
    some = next((t for t in temperatures if t is not None), None)
    if some is None:
        return None
    none = tuple(np.zeros_like(block) for block in some)
    return tuple(
        np.concatenate(blocks, axis=1)
        for blocks in zip(*(none if t is None else t for t in temperatures), strict=True)
    )
