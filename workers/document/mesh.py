"""The client's own mesh: nodes and elements, as they are to be used."""

from collections.abc import Mapping
from typing import Any

from marshmallow import ValidationError, validates_schema

from workers.document.arrays import (
    Connectivity,
    Edges,
    ElementName,
    Nodes,
    beyond,
    beyond_rows,
    first_of,
    no_node,
)
from workers.document.containers import ListOf, MapOf, Part
from workers.document.fields import Name, Whole
from workers.document.record import Record
from workers.document.targets import MOST_NODES
from workers.geometry import MeshBlock

MOST_BLOCKS = 10_000
MOST_NAMES = 20_000


class BlockSchema(Record):
    """Elements of one type."""

    makes = MeshBlock

    element = ElementName("Element type; GET /v1/elements lists what is installed", required=True)
    connectivity = Connectivity(
        "For each element its node numbers from 0: corners counter-clockwise, then mid-sides "
        "starting between corners 1 and 2",
        required=True,
    )
    region = Name("Region that the elements belong to")


class MeshSchema(Record):
    """Nodes and elements, as they are to be used."""

    nodes = Nodes(
        "Positions [x, y], plain numbers in the job's length unit; their order gives the numbers, "
        "from 0",
        required=True,
    )
    blocks = ListOf(
        Part(BlockSchema, "Elements of one type"),
        "The elements, by type and region",
        least=1,
        most=MOST_BLOCKS,
        required=True,
    )
    sides = MapOf(
        Edges("Edges of elements: [node, node] or [node, node, mid-side node]"),
        "Named sides, on the border or inside",
        most=MOST_NAMES,
    )
    points = MapOf(
        Whole("Node number, from 0", least=0, most=MOST_NODES - 1),
        "Named points, each a node",
        most=MOST_NAMES,
    )

    def build(self, data: dict[str, Any]) -> dict[str, Any]:
        return data

    def unbuild(self, thing: Mapping[str, Any]) -> dict[str, Any]:
        return {key: value if len(value) else None for key, value in thing.items()}

    @validates_schema(skip_on_field_errors=False)
    def _numbers_are_nodes(self, data: dict[str, Any], **_: Any) -> None:
        if "nodes" not in data:
            return
        count = len(data["nodes"])
        blocks = {i: {"connectivity": found} for i, block in enumerate(data.get("blocks", ()))
                  if (found := beyond(block.connectivity, count))}  # fmt: skip
        sides = {name: found for name, edges in data.get("sides", {}).items()
                 if (found := first_of(beyond_rows(edges, count)))}  # fmt: skip
        points = {name: [no_node(n, count)] for name, n in data.get("points", {}).items()
                  if n >= count}  # fmt: skip
        errors = {"blocks": blocks, "sides": sides, "points": points}
        if any(errors.values()):
            raise ValidationError({key: found for key, found in errors.items() if found})
