"""Names in a document: each is given once, and whatever refers to one finds it.

Works on the document as it was written, so that these faults are found beside those of form. What
is not of the right form is passed over here: the schemas report it.
"""

from collections import defaultdict
from collections.abc import Iterator, Mapping
from dataclasses import dataclass, field
from typing import Any

from workers.document.faults import pointer, seen, unknown
from workers.document.geometry import WHOLE_PLATE
from workers.document.loads import KINDS
from workers.document.units import POINT_SPRING, SIDE_SPRING, exponents_of
from workers.errors import Fault

INSTEAD = {
    "point": "; total_force spreads a force over a side",
    "area": "; without on it acts on the whole plate",
}
KINDS_OF_GEOMETRY = ("outline", "patches", "mesh")


def faults(document: Mapping[str, Any]) -> Iterator[Fault]:
    """Names given twice, and names that refer to nothing."""
    inventory = take_inventory(table(document.get("geometry")))
    yield from inventory.faults
    yield from _materials(document)
    yield from _cases(document)
    if inventory.kind is not None:
        yield from _regions_used(document, inventory)
        yield from _sizes(document, inventory)
        yield from _supports(document, inventory)
        yield from _loads(document, inventory)


# --- reading what may have any form ------------------------------------------------------------


def table(value: Any) -> Mapping[str, Any]:
    """An object, empty where there is none."""
    return value if isinstance(value, Mapping) else {}


def rows(value: Any) -> Iterator[tuple[int, Mapping[str, Any]]]:
    """The objects in a list, with their positions."""
    for i, item in enumerate(value if isinstance(value, list | tuple) else ()):
        if isinstance(item, Mapping):
            yield i, item


def loads_of(document: Mapping[str, Any]) -> Iterator[tuple[str, str, Mapping[str, Any]]]:
    """Every load: its place, its key and itself."""
    for case, loads in table(document.get("load_cases")).items():
        for i, load in rows(loads):
            key = next((k for k in KINDS if k in load), None)
            if key is not None:
                yield pointer("load_cases", case, i), key, load


# --- what the geometry names -------------------------------------------------------------------


@dataclass
class Inventory:
    """Names of the geometry by what they name."""

    kind: str | None
    sides: set[str] = field(default_factory=set)
    holes: set[str] = field(default_factory=set)
    regions: set[str] = field(default_factory=set)
    points: set[str] = field(default_factory=set)
    faults: list[Fault] = field(default_factory=list)

    @property
    def all(self) -> set[str]:
        return self.sides | self.holes | self.regions | self.points

    def what(self, name: str) -> str:
        """side, hole, region or point."""
        named = {"side": self.sides, "hole": self.holes, "region": self.regions}
        return next((what for what, names in named.items() if name in names), "point")


def take_inventory(geometry: Mapping[str, Any]) -> Inventory:
    """Names of all sides, holes, regions and points; faults where one is given twice."""
    kinds = [kind for kind in KINDS_OF_GEOMETRY if kind in geometry]
    found = Inventory(kinds[0] if len(kinds) == 1 else None)
    given: dict[str, str] = {}  # what each name was first given to
    for what, name, place in _given(geometry):
        first = given.get(name)
        given.setdefault(name, what)
        if name == WHOLE_PLATE:
            text = f'"{WHOLE_PLATE}" is what no region covers; choose another name for this {what}'
        elif first is not None and not first == what == "side":
            text = f"{seen(name)} is already the name of a {first}; each name stands for one thing"
        else:
            text = ""
        if text:
            found.faults.append(Fault(place, text))
        getattr(found, f"{what}s").add(name)
    found.faults += _doubles("patch", geometry.get("patches"), pointer("geometry", "patches"))
    return found


def _given(geometry: Mapping[str, Any]) -> Iterator[tuple[str, str, str]]:
    """What is named, its name, and where."""
    for what, name, place in _given_anything(geometry):
        if isinstance(name, str):
            yield what, name, pointer("geometry", *place)


def _given_anything(
    geometry: Mapping[str, Any],
) -> Iterator[tuple[str, Any, tuple[str | int, ...]]]:
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


def _loop_sides(
    loop: Any, place: tuple[str | int, ...]
) -> Iterator[tuple[str, Any, tuple[str | int, ...]]]:
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


# --- what refers to a name ---------------------------------------------------------------------


def _materials(document: Mapping[str, Any]) -> Iterator[Fault]:
    known = table(document.get("materials"))
    users = [("/plate", table(document.get("plate")))]
    users += [(pointer("geometry", "regions", i), region)
              for i, region in rows(table(document.get("geometry")).get("regions"))]  # fmt: skip
    for place, user in users:
        name = user.get("material")
        if isinstance(name, str) and name not in known:
            yield Fault(f"{place}/material", unknown("material", name, known))


def _cases(document: Mapping[str, Any]) -> Iterator[Fault]:
    cases = table(document.get("load_cases"))
    for i, support in rows(document.get("supports")):
        case = support.get("case")
        if isinstance(case, str) and case not in cases:
            yield Fault(pointer("supports", i, "case"), unknown("load case", case, cases))
    for name, factors in table(document.get("combinations")).items():
        place = pointer("combinations", name)
        if name in cases:
            yield Fault(place, f"{seen(name)} is already the name of a load case")
        for case in table(factors):
            if case not in cases:
                yield Fault(place + pointer(case), unknown("load case", case, cases))


def _regions_used(document: Mapping[str, Any], inventory: Inventory) -> Iterator[Fault]:
    """Regions of patches and blocks exist, and no region is without any."""
    if inventory.kind == "outline":
        return
    geometry, used = table(document["geometry"]), set()
    place = ("patches",) if inventory.kind == "patches" else ("mesh", "blocks")
    parts = geometry.get("patches") if len(place) == 1 else table(geometry["mesh"]).get("blocks")
    for i, part in rows(parts):
        name = part.get("region")
        if isinstance(name, str):
            used.add(name)
            if name not in inventory.regions:
                where = pointer("geometry", *place, i, "region")
                yield Fault(where, unknown("region", name, inventory.regions))
    for i, region in rows(geometry.get("regions")):
        if isinstance(region.get("name"), str) and region["name"] not in used:
            word = "patch" if len(place) == 1 else "block"
            yield Fault(
                pointer("geometry", "regions", i, "name"), f"no {word} belongs to this region"
            )


def _sizes(document: Mapping[str, Any], inventory: Inventory) -> Iterator[Fault]:
    for name in table(table(document.get("meshing")).get("sizes")):
        if name not in inventory.all:
            text = unknown("side, hole, region or point", name, inventory.all)
            yield Fault(pointer("meshing", "sizes", name), text)


def _supports(document: Mapping[str, Any], inventory: Inventory) -> Iterator[Fault]:
    for i, support in rows(document.get("supports")):
        place, on = pointer("supports", i), support.get("on")
        yield from _selector(on, place, inventory)
        if not isinstance(on, str):
            continue
        if on not in inventory.all:
            yield Fault(f"{place}/on", unknown("side, hole, region or point", on, inventory.all))
            continue
        what, springs = inventory.what(on), table(support.get("spring"))
        if "normal" in support and what in ("point", "region"):
            yield Fault(
                f"{place}/normal", f"{seen(on)} is a {what} and has no normal; use ux, uy or along"
            )
        for key in ("normal", "tangential"):
            if key in springs and what == "point":
                yield Fault(f"{place}/spring/{key}", f"{seen(on)} is a point; use x and y")
        if springs and what == "region":
            yield Fault(
                f"{place}/spring", f"{seen(on)} is a region; springs are on sides and points"
            )
        else:
            yield from _spring_units(springs, place, what)


def _spring_units(springs: Mapping[str, Any], place: str, what: str) -> Iterator[Fault]:
    """A spring on a side is stiffness per length; at a point it is not."""
    right, wrong = (POINT_SPRING, SIDE_SPRING) if what == "point" else (SIDE_SPRING, POINT_SPRING)
    for key, value in springs.items():
        if isinstance(value, str) and exponents_of(value) == wrong.exponents:
            yield Fault(
                f"{place}/spring" + pointer(key),
                f"{seen(value)} is {wrong.name}; on a {what} it must be {right.name} such as "
                f'"{right.example}"',
            )


def _loads(document: Mapping[str, Any], inventory: Inventory) -> Iterator[Fault]:
    wanted = {"point": ("point",), "side": ("side", "hole"), "area": ("region",)}
    for place, key, load in loads_of(document):
        on, kind = load.get("on"), KINDS[key]
        yield from _selector(on, place, inventory)
        if isinstance(on, Mapping) and kind.place == "area":
            yield Fault(
                f"{place}/on", f"{key} acts on a region by name, or without on on the whole plate"
            )
        if not isinstance(on, str):
            continue
        if on not in inventory.all:
            known = inventory.regions if kind.place == "area" else inventory.all
            what = " or ".join(wanted[kind.place])
            yield Fault(f"{place}/on", unknown(what, on, known))
        elif inventory.what(on) not in wanted[kind.place]:
            what = " or a ".join(wanted[kind.place])
            text = f"{key} acts on a {what}, and {seen(on)} is a {inventory.what(on)}"
            text += INSTEAD.get(kind.place, "")
            yield Fault(f"{place}/on", text)


def _selector(on: Any, place: str, inventory: Inventory) -> Iterator[Fault]:
    if inventory.kind != "mesh" and "nodes" in table(on):
        yield Fault(f"{place}/on/nodes", "only a mesh of your own (geometry.mesh) has node numbers")
