"""What the geometry of a document names: sides, holes, regions, points, each name once."""

from collections import defaultdict
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from functools import cached_property
from typing import Any

from workers.document.faults import pointer, seen
from workers.document.raw import rows, table
from workers.errors import Fault

KINDS_OF_GEOMETRY = ("outline", "patches", "mesh")
WHOLE_PLATE = "plate"  # name of what no region covers; no part may take it

Place = tuple[str | int, ...]


@dataclass
class Inventory:
    """Names of the geometry, in document order.

    all : "side", "hole", "region" or "point" by name.
    """

    kind: str | None
    all: dict[str, str] = field(default_factory=dict)
    faults: list[Fault] = field(default_factory=list)

    @cached_property
    def regions(self) -> list[str]:
        return [name for name, what in self.all.items() if what == "region"]


def take_inventory(geometry: Mapping[str, Any]) -> Inventory:
    """Names of all sides, holes, regions and points; faults where one is given twice."""
    kinds = [kind for kind in KINDS_OF_GEOMETRY if kind in geometry]
    found = Inventory(kinds[0] if len(kinds) == 1 else None)
    for what, name, place in _given(geometry):
        first = found.all.get(name)
        found.all.setdefault(name, what)
        if name == WHOLE_PLATE:
            text = f'"{WHOLE_PLATE}" is what no region covers; choose another name for this {what}'
        elif first is not None and not first == what == "side":
            text = f"{seen(name)} is already the name of a {first}; each name stands for one thing"
        else:
            text = ""
        if text:
            found.faults.append(Fault(place, text))
    found.faults += _doubles("patch", geometry.get("patches"), pointer("geometry", "patches"))
    return found


def _given(geometry: Mapping[str, Any]) -> Iterator[tuple[str, str, str]]:
    """What is named, its name, and where."""
    for what, name, place in _given_anything(geometry):
        if isinstance(name, str):
            yield what, name, pointer("geometry", *place)


def _given_anything(
    geometry: Mapping[str, Any],
) -> Iterator[tuple[str, Any, Place]]:
    yield from _loop_sides(geometry.get("outline"), ("outline",))
    for key, what in (("holes", "hole"), ("regions", "region")):
        for i, part in rows(geometry.get(key)):
            yield what, part.get("name"), (key, i, "name")
            yield from _loop_sides(part.get("outline"), (key, i, "outline"))
    for i, patch in rows(geometry.get("patches")):
        sides = patch.get("sides")
        for j, name in enumerate(sides if isinstance(sides, list | tuple) else ()):
            yield "side", name, ("patches", i, "sides", j)
    for name in table(geometry.get("points")):
        yield "point", name, ("points", name)
    mesh = table(geometry.get("mesh"))
    for key in ("sides", "points"):
        for name in table(mesh.get(key)):
            yield key[:-1], name, ("mesh", key, name)


def _loop_sides(loop: Any, place: Place) -> Iterator[tuple[str, Any, Place]]:
    for i, vertex in rows(loop):
        for key in ("side", "fillet_side"):
            yield "side", vertex.get(key), (*place, i, key)


def _doubles(what: str, listed: Any, place: str) -> list[Fault]:
    found: dict[str, list[int]] = defaultdict(list)
    for i, part in rows(listed):
        if isinstance(part.get("name"), str):
            found[part["name"]].append(i)
    return [
        Fault(f"{place}/{i}/name", f"another {what} is named {seen(name)}")
        for name, positions in found.items() for i in positions[1:]
    ]  # fmt: skip
