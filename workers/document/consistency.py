"""What one part of a document asks of another: material data, meshing that fits the geometry.

Like `names.py` it works on the document as it was written, and passes over what has a wrong form.
"""

from collections.abc import Iterator, Mapping
from typing import Any

from workers.document.faults import pointer, seen
from workers.document.raw import loads_of, rows, table
from workers.document.supports import PRESCRIBED
from workers.document.units import value_of
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
    yield from _moves_in_no_case(document)
    yield from _node_numbers(document)
    yield from _hot_spots(document)


def _materials_used(document: Mapping[str, Any], region: str | None = None) -> dict[str, Any]:
    """Materials by name: of one region, or of the whole plate."""
    geometry, plate = table(document.get("geometry")), table(document.get("plate"))
    parts = geometry.get("patches", table(geometry.get("mesh")).get("blocks"))
    everywhere = "outline" in geometry or any("region" not in part for _, part in rows(parts))
    regions = [r for _, r in rows(geometry.get("regions")) if region in (None, r.get("name"))]
    names = [r.get("material", plate.get("material")) for r in regions]
    if region is None and everywhere:
        names.append(plate.get("material"))
    materials = table(document.get("materials"))
    return {name: materials[name] for name in names
            if isinstance(name, str) and isinstance(materials.get(name), Mapping)}  # fmt: skip


def _material_data(document: Mapping[str, Any]) -> Iterator[Fault]:
    """Density for body forces by acceleration, expansion for temperature."""
    asked = set()  # what a load takes of which region, asked once
    missing = set()
    for place, key, load in loads_of(document):
        taken, on = TAKES.get(key), load.get("on")
        if taken is None or not (on is None or isinstance(on, str)) or (taken, on) in asked:
            continue
        asked.add((taken, on))
        for name, material in _materials_used(document, on).items():
            if taken not in material and (name, taken) not in missing:
                missing.add((name, taken))
                reason = f"is required because of {key} in {place}"
                yield Fault(pointer("materials", name, taken), reason)


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
        elif "patches" in geometry and key in ("size", "sizes", "method"):
            yield Fault(
                pointer("meshing", key),
                "has no effect on patches; their divisions and grading set the sizes",
            )
    if "mesh" in geometry and table(document.get("requests")).get("convergence") is True:
        yield Fault(
            pointer("requests", "convergence"),
            "needs finer meshes, which are made from an outline or from patches; a finished mesh "
            "stays as it is",
        )


def _empty_cases(document: Mapping[str, Any]) -> Iterator[Fault]:
    """A case without loads needs a support that moves in it."""
    moved = set()  # cases in which a support moves; None is every case
    for _, support in rows(document.get("supports")):
        case = support.get("case")
        if (case is None or isinstance(case, str)) and any(
            map(_moves, map(support.get, PRESCRIBED))
        ):
            moved.add(case)
    for case, loads in table(document.get("load_cases")).items():
        if loads == [] and not {None, case} & moved:
            text = "has no loads and no support is moved in this case"
            yield Fault(pointer("load_cases", case), text)


def _moves_in_no_case(document: Mapping[str, Any]) -> Iterator[Fault]:
    """With cases made of factors, a prescribed displacement needs its factor as well."""
    if "cases" not in document:
        return
    for i, support in rows(document.get("supports")):
        for key in PRESCRIBED:
            if "case" not in support and _moves(support.get(key)):
                text = (
                    "a prescribed displacement needs `case` beside it where `cases` are made of "
                    "factors: the load case whose factor it takes"
                )
                yield Fault(pointer("supports", i, key), text)


def _moves(value: Any) -> bool:
    """Whether a prescribed displacement is anything but zero, be it number or text with a unit."""
    return bool(value_of(value) if isinstance(value, str) else value)


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


def _hot_spots(document: Mapping[str, Any]) -> Iterator[Fault]:
    """Which thickness is meant must be said where the plate has more than one."""
    regions = rows(table(document.get("geometry")).get("regions"))
    if not any("thickness" in region for _, region in regions):
        return
    for name, spot in table(table(document.get("requests")).get("hot_spots")).items():
        if isinstance(spot, Mapping) and "thickness" not in spot:
            yield Fault(
                pointer("requests", "hot_spots", name, "thickness"),
                "is required: the plate has regions of other thickness",
            )
