"""The installed element types, found through the entry-point group "fishplate.elements".

Loaded on first use. Built-in types register exactly as a stranger's would. A broken plug-in is
reported and left out; a name that two distributions claim belongs to neither.
"""

from collections import defaultdict
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from functools import lru_cache
from importlib.metadata import EntryPoint, entry_points
from inspect import isabstract, isclass
from types import MappingProxyType

import numpy as np

from elements.contract import ElementType
from elements.errors import ElementRegistrationError, UnknownElementError

GROUP = "fishplate.elements"

# VTK cell type of each shape that the file writer knows: (corners, order) -> type.
CELL_TYPES = MappingProxyType({(3, 1): 5, (3, 2): 22, (4, 1): 9, (4, 2): 23})


@dataclass(frozen=True)
class Registry:
    """What was found: usable types by name, and for each unusable name the reason."""

    types: Mapping[str, ElementType]
    faults: Mapping[str, str]


def available() -> dict[str, ElementType]:
    """Usable element types by name, in alphabetical order."""
    return dict(_installed().types)


def get(name: str) -> ElementType:
    """The element type of that name.

    Raises
    ------
    UnknownElementError        nothing of that name is installed.
    ElementRegistrationError   something is, but it is broken or the name has two owners.
    """
    registry = _installed()
    if name in registry.faults:
        raise ElementRegistrationError(registry.faults[name])
    if name not in registry.types:
        raise UnknownElementError(name, list(registry.types))
    return registry.types[name]


def problems() -> list[str]:
    """One sentence for each plug-in that cannot be used."""
    return list(_installed().faults.values())


@lru_cache(maxsize=1)
def _installed() -> Registry:
    return load_registry(entry_points(group=GROUP))


def load_registry(found: Iterable[EntryPoint]) -> Registry:
    """Load and check entry points; never raises because of a plug-in."""
    claims: dict[str, list[EntryPoint]] = defaultdict(list)
    for point in found:
        claims[point.name].append(point)
    types: dict[str, ElementType] = {}
    faults: dict[str, str] = {}
    for name, points in sorted(claims.items()):
        if len(points) > 1:
            owners = " and ".join(sorted(_owner(point) for point in points))
            faults[name] = f"element type {name!r} is claimed by {owners}; uninstall one of them"
            continue
        try:
            types[name] = _load(points[0])
        except Exception as error:  # noqa: BLE001  a stranger's module may raise anything
            faults[name] = f"element type {name!r} of {_owner(points[0])} is unusable: {error!r}"
    return Registry(MappingProxyType(types), MappingProxyType(faults))


def _owner(point: EntryPoint) -> str:
    where = f"{point.dist.name} {point.dist.version}" if point.dist else "an unnamed distribution"
    return f"{where} ({point.value})"


def _load(point: EntryPoint) -> ElementType:
    kind = point.load()
    if not (isclass(kind) and issubclass(kind, ElementType)):
        raise ElementRegistrationError(f"{point.value} is not a subclass of ElementType")
    if isabstract(kind):
        missing = ", ".join(sorted(kind.__abstractmethods__))
        raise ElementRegistrationError(f"{point.value} does not define {missing}")
    element = kind()
    faults = declaration_faults(element)
    if getattr(element, "name", None) != point.name:
        faults.append(f"its name is not that of its entry point, {point.name!r}")
    if faults:
        raise ElementRegistrationError("; ".join(faults))
    return element


def declaration_faults(element: ElementType) -> list[str]:
    """What is wrong with the class attributes of a type; empty when nothing is."""
    declared = ("name", "corners", "order", "natural_nodes", "sides", "vtk_cell_type")
    missing = [name for name in declared if not hasattr(element, name)]
    if missing:
        return [f"it does not declare {', '.join(missing)}"]
    if element.corners not in (3, 4) or element.order not in (1, 2):
        return ["corners must be 3 or 4, and order 1 or 2"]
    corners, faults = element.corners, []
    sides: list[tuple[int, ...]] = [(i, (i + 1) % corners) for i in range(corners)]
    nodes = REFERENCE_CORNERS[corners]
    if element.order == 2:
        nodes = np.vstack((nodes, [(nodes[a] + nodes[b]) / 2 for a, b in sides]))
        sides = [(*side, corners + i) for i, side in enumerate(sides)]
    if np.shape(element.natural_nodes) != nodes.shape or (element.natural_nodes != nodes).any():
        faults.append("natural_nodes must be the corners, then for order 2 the mid-side nodes")
    if [tuple(side) for side in element.sides] != sides:
        faults.append(f"sides must be {sides}")
    if element.vtk_cell_type != CELL_TYPES[corners, element.order]:
        faults.append(f"vtk_cell_type must be {CELL_TYPES[corners, element.order]}")
    return faults


REFERENCE_CORNERS: Mapping[int, np.ndarray] = MappingProxyType(
    {
        3: np.array([[0.0, 0.0], [1.0, 0.0], [0.0, 1.0]]),
        4: np.array([[-1.0, -1.0], [1.0, -1.0], [1.0, 1.0], [-1.0, 1.0]]),
    }
)
