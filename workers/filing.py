"""The files of one solved job: fields, pictures and tables, each made when it is wanted.

Whether with the job or months later, they are made from the same few things by the same functions,
and so are the same byte for byte.
"""

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property
from itertools import islice
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray

from workers.analysis.combine import States, load_states, superpose, superpose_blocks
from workers.analysis.envelope import WORST, Envelope
from workers.analysis.field_mesh import FieldMesh
from workers.analysis.fields import Fields, displacement_fields
from workers.analysis.model import Model
from workers.analysis.recovery import Recovery, Temperature
from workers.analysis.singularities import SingularPlace, find_singular_places
from workers.analysis.summary import form_envelope
from workers.cautions import Caution
from workers.errors import PicturesUnavailableError
from workers.job import Job
from workers.outputs import preview, vtu
from workers.outputs.convergence import render_convergence
from workers.outputs.envelope_table import write_envelope_table
from workers.outputs.names import file_name

Progress = Callable[[str, float], None]
Json = dict[str, Any]

# With more cases and combinations than this, the envelope's field file is written with the job and
# theirs are made when asked for; `requests.fields` says otherwise.
EAGER_FIELDS = 20


def eager_states(job: Job, names: Sequence[str]) -> tuple[str, ...]:
    """Of the states, those whose field files are written with the job."""
    wanted = job.requests.field_files
    if wanted is None:
        wanted = "all" if len(names) <= EAGER_FIELDS else "envelope"
    if isinstance(wanted, str):
        return tuple(names) if wanted == "all" else ()
    return wanted


def draw_line(
    folder: Path, job: Job, name: str, results: Mapping[str, Any], cautions: Sequence[Caution]
) -> Path:
    """Draw the stress along a line of the results; KeyError if there is no such line."""
    line = results["lines"][name]
    path = folder / "lines" / f"{file_name(name)}.png"
    path.parent.mkdir(exist_ok=True)
    preview.render_line(path, job, name, line, cautions=cautions)
    return path


@dataclass(frozen=True, eq=False)
class Work:
    """A solved model, and what is made from it when first needed.

    displacement : (N, 2, c) of the load cases [L]
    temperature : for each block (m, c) temperature changes [K], None if there are none
    formed : the envelope, where it is known already
    built : the stress recovery, likewise
    """

    model: Model
    displacement: NDArray[np.float64]
    temperature: Temperature
    formed: Envelope | None = None
    built: Recovery | None = None

    @property
    def job(self) -> Job:
        return self.model.job

    @cached_property
    def recovery(self) -> Recovery:
        return self.built or Recovery.build(self.model)

    @cached_property
    def states(self) -> States:
        return load_states(self.job)

    @property
    def field_mesh(self) -> FieldMesh:
        return self.recovery.field_mesh

    @cached_property
    def singular_places(self) -> tuple[SingularPlace, ...]:
        return find_singular_places(self.model)

    @cached_property
    def envelope(self) -> Envelope:
        """The worst of all states at every point; `states.names` are the states that it counts."""
        if self.formed is not None:
            return self.formed
        return form_envelope(self.recovery, self.displacement, self.temperature, self.states)

    def fields(self, state: str) -> Fields:
        """Fields of a load case or combination; KeyError if there is no such state."""
        column = self.states.index(state)
        columns = range(column, column + 1)
        return displacement_fields(
            self.recovery,
            state,
            superpose(self.displacement, self.states, columns),
            superpose_blocks(self.temperature, self.states, columns),
        )


@dataclass(frozen=True, eq=False)
class Filing:
    """Writes files of one job into its folder, each under a name of its own until it is whole."""

    folder: Path
    work: Work
    cautions: list[Caution]
    results: Mapping[str, Any]

    def write_fields(self, state: str) -> Path:
        path = self.folder / "fields" / f"{file_name(state)}.vtu"
        path.parent.mkdir(exist_ok=True)
        fields = self.work.fields(state)
        vtu.write_fields(path, self.work.job, self.work.field_mesh, fields, self.cautions)
        return path

    def draw(self, state: str, quantity: str) -> Path:
        path = self.folder / "previews" / file_name(state) / f"{quantity}.png"
        if quantity not in preview.QUANTITIES:
            raise KeyError(quantity)
        path.parent.mkdir(parents=True, exist_ok=True)
        work = self.work
        if quantity == "model":
            preview.render_model(
                path, work.job, work.model.mesh, case=state, cautions=self.cautions
            )
            return path
        fields = work.fields(state)
        if quantity == "deformed":
            largest = max(state["displacement"]["value"] for state in self._states.values())
            preview.render_deformed(
                path, work.job, work.field_mesh, fields, cautions=self.cautions, largest=largest
            )
        else:
            preview.render_field(
                path, work.job, work.field_mesh, fields, quantity,
                cautions=self.cautions, limits=self._limits(quantity),
                peak=self._states[state][quantity], places=work.singular_places,
            )  # fmt: skip
        return path

    # --- the envelope --------------------------------------------------------------------------

    def write_envelope(self) -> Path:
        path = self._in_envelope("fields.vtu")
        work = self.work
        vtu.write_envelope(
            path, work.job, work.field_mesh, work.envelope, work.states.names, self.cautions
        )
        return path

    def write_envelope_table(self) -> Path:
        path = self._in_envelope("nodes.csv")
        work = self.work
        text = write_envelope_table(
            work.field_mesh, work.job.units, work.envelope, work.states.names
        )
        path.write_bytes(text.encode())
        return path

    def draw_governing(self, quantity: str) -> Path:
        if quantity not in WORST:
            raise KeyError(quantity)
        path = self._in_envelope(f"{quantity}.png")
        work = self.work
        preview.render_governing(
            path, work.job, work.field_mesh, work.envelope.state[quantity], quantity,
            work.states.names, self.results["envelope"][quantity], cautions=self.cautions,
        )  # fmt: skip
        return path

    def draw_convergence(self) -> Path:
        """The picture of the convergence record, which the results must have."""
        path = self.folder / "convergence.png"
        record = self.results["convergence"]
        render_convergence(path, self.work.job, record, cautions=self.cautions)
        return path

    def _in_envelope(self, name: str) -> Path:
        # A folder of its own: no case can have the name of anything in it.
        (self.folder / "envelope").mkdir(exist_ok=True)
        return self.folder / "envelope" / name

    # --- with the job ---------------------------------------------------------------------------

    def write_some(self, progress: Progress) -> Json:
        """The field files that the job wants at once; their paths within the folder."""
        names = eager_states(self.work.job, self.work.states.names)
        written: Json = {"fields": {}, "envelope": {"previews": {}}}
        for done, name in enumerate(names):
            progress("writing", done / len(names))
            written["fields"][name] = self._within(self.write_fields(name))
        if self.results["convergence"] is not None:
            written["convergence"] = self._within(self.draw_convergence())
        if len(self.work.states) > 1 or self.work.job.requests.field_files == "envelope":
            written["envelope"]["fields"] = self._within(self.write_envelope())
        return written

    def draw_some(self, count: int, files: Json, progress: Progress) -> Json:
        """The most useful pictures first, into `files`; returns whether there can be any."""
        files["previews"] = {}
        if (reason := preview.probe()) is not None:
            return {"available": False, "reason": reason}
        for done, (state, quantity) in enumerate(islice(self._worth_drawing(), count)):
            progress("drawing", done / count)
            try:
                if state is None:
                    path = self._within(self.draw_governing(quantity))
                    files["envelope"]["previews"][quantity] = path
                else:
                    path = self._within(self.draw(state, quantity))
                    files["previews"].setdefault(state, {})[quantity] = path
            except PicturesUnavailableError as error:
                return {"available": False, "reason": str(error)}
        return {"available": True}

    def _within(self, path: Path) -> str:
        return str(path.relative_to(self.folder))

    def draw_some_lines(self, count: int) -> dict[str, str]:
        """Graphs of the first lines; their paths within the folder."""
        drawn = {}
        for name in islice(self.results["lines"], count):
            path = draw_line(self.folder, self.work.job, name, self.results, self.cautions)
            drawn[name] = self._within(path)
        return drawn

    def _worth_drawing(self) -> Iterator[tuple[str | None, str]]:
        """All about the governing state, what governs where (state None), then case by case."""
        first = self.results["envelope"]["von_mises"]["governs"]
        others = [name for name in self.work.states.names if name != first]
        yield from ((first, quantity) for quantity in preview.QUANTITIES)
        if others:
            yield None, "von_mises"
        yield from ((state, quantity) for state in others for quantity in preview.QUANTITIES)

    def _limits(self, quantity: str) -> tuple[float, float]:
        """One legend for all states of the job, so that their pictures compare.

        It ends with the reported peaks, which leave singular places out, and at the other end no
        farther from zero than with them: there a singular place would count.
        """
        peaks = [state[quantity]["value"] for state in self._states.values()]
        others = [
            state[quantity].get("least", {"value": 0.0})["value"] for state in self._states.values()
        ]
        low, high = min(peaks + others), max(peaks + others)
        if low < 0 < high:
            reach = max(map(abs, peaks))
            low, high = max(low, -reach), min(high, reach)
        return low, high

    @cached_property
    def _states(self) -> Mapping[str, Any]:
        return {**self.results["cases"], **self.results["combinations"]}
