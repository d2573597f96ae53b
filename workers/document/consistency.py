"""What one part of a document asks of another: material data, meshing that fits the geometry.

Like `names.py` it works on the document as it was written, and passes over what has a wrong form.
"""

from collections.abc import Iterator, Mapping
from typing import Any

from workers.document.faults import pointer, seen
from workers.document.inventory import KINDS_OF_GEOMETRY
from workers.document.raw import loads_of, rows, table
from workers.document.supports import PRESCRIBED
from workers.errors import Fault

# What a load takes from the material.
TAKES = {
    "acceleration": "density",
    "spin": "density",
    "temperature_change": "thermal_expansion",
}


def faults(document: Mapping[str, Any]) -> Iterator[Fault]:
    yield from _material_data(document)
    yield from _yield_strength(document)
    yield from _meshing(document)
    yield from _empty_cases(document)
    yield from _node_numbers(document)


def _materials_used(document: Mapping[str, Any], region: str | None = None) -> dict[str, Any]:
    """Materials by name: of one region, or of the whole plate."""
    geometry, plate = table(document.get("geometry")), table(document.get("plate"))
    kind = next((k for k in KINDS_OF_GEOMETRY if k in geometry), "outline")
    parts = (
        geometry.get("patches") if kind == "patches" else table(geometry.get("mesh")).get("blocks")
    )
    regions = [r for _, r in rows(geometry.get("regions")) if region in (None, r.get("name"))]
    names = [r.get("material", plate.get("material")) for r in regions]
    if region is None and (kind == "outline" or any("region" not in p for _, p in rows(parts))):
        names.append(plate.get("material"))
    materials = table(document.get("materials"))
    return {n: materials[n] for n in names if isinstance(n, str)
            and isinstance(materials.get(n), Mapping)}  # fmt: skip


def _material_data(document: Mapping[str, Any]) -> Iterator[Fault]:
    """Density for body forces by acceleration, expansion for temperature."""
    reported = set()
    for place, key, load in loads_of(document):
        on = load.get("on")
        if key not in TAKES or not (on is None or isinstance(on, str)):
            continue
        for name, material in _materials_used(document, on).items():
            if TAKES[key] not in material and (name, TAKES[key]) not in reported:
                reported.add((name, TAKES[key]))
                yield Fault(
                    pointer("materials", name, TAKES[key]),
                    f"is required because of {key} in {place}",
                )


def _yield_strength(document: Mapping[str, Any]) -> Iterator[Fault]:
    if "factor_on_yield" not in table(document.get("limits")):
        return
    for name, material in _materials_used(document).items():
        if "yield_strength" not in material:
            yield Fault(
                pointer("materials", name, "yield_strength"),
                "is required because of /limits/factor_on_yield",
            )


def _meshing(document: Mapping[str, Any]) -> Iterator[Fault]:
    """A key that could have no effect is a fault, not a surprise."""
    geometry = table(document.get("geometry"))
    for key in table(document.get("meshing")):
        if "mesh" in geometry:
            yield Fault(pointer("meshing", key), "has no effect on a finished mesh; leave it out")
        elif "patches" in geometry and key != "element":
            yield Fault(
                pointer("meshing", key),
                "has no effect on patches; their divisions and grading set the sizes",
            )


def _empty_cases(document: Mapping[str, Any]) -> Iterator[Fault]:
    """A case without loads needs a support that moves in it."""
    supports = [s for _, s in rows(document.get("supports"))]
    for case, loads in table(document.get("load_cases")).items():
        if loads == [] and not any(
            s.get("case", case) == case and any(s.get(key) for key in PRESCRIBED) for s in supports
        ):
            yield Fault(
                pointer("load_cases", case), "has no loads and no support is moved in this case"
            )


def _node_numbers(document: Mapping[str, Any]) -> Iterator[Fault]:
    """Node numbers of selectors exist."""
    nodes = table(table(document.get("geometry")).get("mesh")).get("nodes")
    if not isinstance(nodes, list) or not nodes:
        return
    places = [(pointer("supports", i), s) for i, s in rows(document.get("supports"))]
    places += [(place, load) for place, _, load in loads_of(document)]
    for place, part in places:
        numbers = table(part.get("on")).get("nodes")
        for k, number in enumerate(numbers if isinstance(numbers, list) else ()):
            if isinstance(number, int) and number >= len(nodes):
                yield Fault(
                    f"{place}/on/nodes/{k}",
                    f"there is no node {seen(number)}; the {len(nodes)} nodes are numbered from 0 "
                    f"to {len(nodes) - 1}",
                )
