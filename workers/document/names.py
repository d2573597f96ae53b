"""Names in a document: each is given once, and whatever refers to one finds it.

Works on the document as it was written, so that these faults are found beside those of form.
"""

from collections.abc import Collection, Iterator, Mapping
from typing import Any

from workers.document.factor_table import read_table
from workers.document.faults import pointer, seen, unknown
from workers.document.inventory import Inventory, take_inventory
from workers.document.loads import KINDS
from workers.document.raw import loads_of, rows, table
from workers.document.units import POINT_SPRING, SIDE_SPRING, exponents_of
from workers.errors import Fault

INSTEAD = {
    "point": "; total_force spreads a force over a side",
    "area": "; without on it acts on the whole plate",
}


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
    patterns = table(document.get("load_cases"))
    for i, support in rows(document.get("supports")):
        case = support.get("case")
        if isinstance(case, str) and case not in patterns:
            yield Fault(pointer("supports", i, "case"), unknown("load case", case, patterns))
    yield from _factored(document, patterns)
    cases = _case_names(document)
    if cases is None:
        return
    word = "case" if "cases" in document else "load case"
    for name, factors in table(document.get("combinations")).items():
        place = pointer("combinations", name)
        if name in cases:
            yield Fault(place, f"{seen(name)} is already the name of a {word}")
        for case in table(factors):
            if case not in cases:
                yield Fault(place + pointer(case), unknown(word, case, cases))
    yield from _fields_wanted(document, cases)


def _fields_wanted(document: Mapping[str, Any], cases: Collection[str]) -> Iterator[Fault]:
    """States whose field files are asked for exist."""
    states = dict.fromkeys([*cases, *table(document.get("combinations"))])
    wanted = table(document.get("requests")).get("fields")
    for i, name in enumerate(wanted if isinstance(wanted, list | tuple) else ()):
        if isinstance(name, str) and name not in states:
            text = unknown("case or combination", name, states)
            yield Fault(pointer("requests", "fields", i), text)


def _factored(document: Mapping[str, Any], patterns: Collection[str]) -> Iterator[Fault]:
    """Cases made of factors are made of load cases that there are."""
    cases = document.get("cases")
    if isinstance(cases, str):
        found = read_table(cases)
        if found.heading in patterns:
            text = (
                f"line 1, column 1: {seen(found.heading)} is a load case; the first column is for "
                'the names of the cases, under a heading such as "case"'
            )
            yield Fault("/cases", text)
        for name, column in found.patterns.items():
            if name not in patterns:
                text = f"line 1, column {column}: {unknown('load case', name, patterns)}"
                yield Fault("/cases", text)
    for name, factors in table(cases).items():
        for pattern in table(factors):
            if pattern not in patterns:
                place = pointer("cases", name, pattern)
                yield Fault(place, unknown("load case", pattern, patterns))


def _case_names(document: Mapping[str, Any]) -> Collection[str] | None:
    """Names of the cases that the results will hold; None where a table leaves them open."""
    cases = document.get("cases")
    if isinstance(cases, str):
        found = read_table(cases)
        return None if found.faults else found.cases
    return table(cases if "cases" in document else document.get("load_cases"))


def _regions_used(document: Mapping[str, Any], inventory: Inventory) -> Iterator[Fault]:
    """Regions of patches and blocks exist, and no region is without any."""
    if inventory.kind == "outline":
        return
    geometry = table(document["geometry"])
    word, place, parts = "patch", "/geometry/patches", geometry.get("patches")
    if inventory.kind == "mesh":
        word, place, parts = "block", "/geometry/mesh/blocks", table(geometry["mesh"]).get("blocks")
    used = {i: p["region"] for i, p in rows(parts) if isinstance(p.get("region"), str)}
    lost = {i: name for i, name in used.items() if inventory.all.get(name) != "region"}
    named = set(used.values())
    for i, name in lost.items():
        yield Fault(f"{place}/{i}/region", unknown("region", name, inventory.regions))
    for i, region in rows(geometry.get("regions")):
        # Where a name is lost, it may be this region that was meant.
        if not lost and isinstance(region.get("name"), str) and region["name"] not in named:
            yield Fault(f"/geometry/regions/{i}/name", f"no {word} belongs to this region")


def _sizes(document: Mapping[str, Any], inventory: Inventory) -> Iterator[Fault]:
    for name in table(table(document.get("meshing")).get("sizes")):
        if name not in inventory.all:
            text = unknown("side, hole, region or point", name, inventory.all)
            yield Fault(pointer("meshing", "sizes", name), text)


def _supports(document: Mapping[str, Any], inventory: Inventory) -> Iterator[Fault]:
    for i, support in rows(document.get("supports")):
        place, on = pointer("supports", i), support.get("on")
        yield from _selector(on, place, inventory)
        if isinstance(on, Mapping):
            what = "side" if {"segment", "circle"} & on.keys() else "selection"
            yield from _spring_units(table(support.get("spring")), place, what)
        elif isinstance(on, str) and on in inventory.all:
            yield from _named_support(support, place, on, inventory.all[on])
        elif isinstance(on, str):
            yield Fault(f"{place}/on", unknown("side, hole, region or point", on, inventory.all))


def _named_support(support: Mapping[str, Any], place: str, on: str, what: str) -> Iterator[Fault]:
    """What a point or a region cannot do."""
    springs = table(support.get("spring"))
    if "normal" in support and what in ("point", "region"):
        text = f"{seen(on)} is a {what} and has no normal; use ux, uy or along"
        yield Fault(f"{place}/normal", text)
    if springs and what == "region":
        text = f"{seen(on)} is a region; springs act on sides and at points"
        yield Fault(f"{place}/spring", text)
        return
    for key in ("normal", "tangential"):
        if key in springs and what == "point":
            yield Fault(f"{place}/spring/{key}", f"{seen(on)} is a point; use x and y")
    yield from _spring_units(springs, place, what)


def _spring_units(springs: Mapping[str, Any], place: str, what: str) -> Iterator[Fault]:
    """A spring on a side is stiffness per length; at a point it is not.

    Whether the nodes in a box or list form a side is only known on the mesh, so that a unit there
    could be of the other kind: a plain number is the only one that cannot be misread.
    """
    right, wrong = (POINT_SPRING, SIDE_SPRING) if what == "point" else (SIDE_SPRING, POINT_SPRING)
    for key, value in springs.items():
        exponents = exponents_of(value) if isinstance(value, str) else None
        if exponents not in (right.exponents, wrong.exponents):
            continue
        text = f"{seen(value)} is {wrong.name}; on a {what} it must be {right.name} such as "
        text += f'"{right.example}"'
        if what == "selection":
            text = "must be a plain number on a box or nodes, which may be sides or points"
        elif exponents == right.exponents:
            continue
        yield Fault(f"{place}/spring" + pointer(key), text)


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
        elif inventory.all[on] not in wanted[kind.place]:
            what = " or a ".join(wanted[kind.place])
            text = f"{key} acts on a {what}, and {seen(on)} is a {inventory.all[on]}"
            text += INSTEAD.get(kind.place, "")
            yield Fault(f"{place}/on", text)


def _selector(on: Any, place: str, inventory: Inventory) -> Iterator[Fault]:
    if inventory.kind != "mesh" and "nodes" in table(on):
        yield Fault(f"{place}/on/nodes", "only a mesh of your own (geometry.mesh) has node numbers")
