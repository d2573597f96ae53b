"""The envelope at every node as a table: value and governing state of each measure."""

from collections.abc import Iterator, Sequence
from typing import Any

from workers.analysis.envelope import Envelope
from workers.analysis.field_mesh import FieldMesh
from workers.job import Units
from workers.outputs.csv_text import csv_text, inert


def write_envelope_table(
    field_mesh: FieldMesh, units: Units, envelope: Envelope, names: Sequence[str]
) -> str:
    """CSV text: a row for each node in each region that meets there.

    names : of the states that the envelope counts
    """
    return csv_text(_rows(field_mesh, units, envelope, names))


def _rows(
    field_mesh: FieldMesh, units: Units, envelope: Envelope, names: Sequence[str]
) -> Iterator[list[Any]]:
    heading = ["node", "region", f"x [{units.length}]", f"y [{units.length}]"]
    for measure in envelope.value:
        unit = units.length if measure == "displacement" else units.stress
        heading += [f"{measure} [{unit}]", f"{measure} governed by"]
    yield heading
    names = [inert(name) for name in names]  # once, not at every node
    columns: list[Sequence[Any]] = [
        field_mesh.origin.tolist(),
        [field_mesh.mesh.regions[region] for region in field_mesh.region],
        *field_mesh.points.T.tolist(),
    ]
    for measure, values in envelope.value.items():
        columns += [values.tolist(), [names[state] for state in envelope.state[measure]]]
    yield from map(list, zip(*columns, strict=True))
