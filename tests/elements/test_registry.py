"""The registry with entry points of invented distributions, sound and broken."""

import sys
from collections.abc import Iterator
from importlib.metadata import Distribution, EntryPoint
from types import ModuleType, SimpleNamespace

import numpy as np
import pytest

from elements import registry
from elements.contract import ElementType
from elements.errors import ElementRegistrationError, UnknownElementError
from elements.q4 import Q4
from elements.q8 import Q8
from elements.t3 import T3


class Sound(Q4):
    name = "Sound"


class OtherName(Q4):
    name = "SomethingElse"


class WrongCell(Q8):
    name = "WrongCell"
    vtk_cell_type = 9


class WrongSides(T3):
    name = "WrongSides"
    sides = ((1, 0), (2, 1), (0, 2))


class WrongNodes(Q4):
    name = "WrongNodes"
    natural_nodes = np.array([[0.0, 0.0], [1.0, 0.0], [1.0, 1.0], [0.0, 1.0]])


class WrongOrder(Q4):
    name = "WrongOrder"
    order = 3


class Raising(Q4):
    name = "Raising"

    def __init__(self) -> None:
        raise RuntimeError("no licence dongle")


class Unfinished(ElementType):
    name = "Unfinished"


class Undeclared(ElementType):
    shape_functions = gradients = stiffness_rule = load_rule = recovery_points = None


NOT_A_CLASS = 42


class FakeDistribution(Distribution):
    """Just enough of an installed distribution to own entry points."""

    def __init__(self, name: str) -> None:
        self._name = name

    metadata = property(lambda self: {"Name": self._name, "Version": "1.2"})

    def read_text(self, filename: str) -> str | None:
        return None

    def locate_file(self, path: object) -> SimpleNamespace:
        return SimpleNamespace(path=path)


@pytest.fixture(autouse=True)
def plugin_module(monkeypatch: pytest.MonkeyPatch) -> None:
    """The classes above under an importable name, whatever the test runner calls this file."""
    module = ModuleType("invented_plugin")
    vars(module).update(globals())
    monkeypatch.setitem(sys.modules, "invented_plugin", module)


@pytest.fixture
def fresh_registry() -> Iterator[None]:
    registry._installed.cache_clear()
    yield
    registry._installed.cache_clear()


def claim(
    name: str, attribute: str | None = None, owner: str = "yard-elements", module: str = ""
) -> EntryPoint:
    value = f"{module or 'invented_plugin'}:{attribute or name}"
    point = EntryPoint(name=name, value=value, group=registry.GROUP)
    return point._for(FakeDistribution(owner))


def test_the_four_built_in_types_are_installed_without_faults() -> None:
    """From the packaging metadata, exactly as a stranger's type would be."""
    assert {"T3", "T6", "Q4", "Q8"} <= set(registry.available())
    assert registry.problems() == []
    assert all(name == element.name for name, element in registry.available().items())


def test_an_unknown_name_raises_an_error_that_lists_what_there_is() -> None:
    with pytest.raises(UnknownElementError, match="Q4, Q8, T3, T6") as caught:
        registry.get("Q7")
    assert caught.value.name == "Q7"


def test_a_sound_plug_in_is_available_under_its_name() -> None:
    found = registry.load_registry([claim("Sound")])
    assert isinstance(found.types["Sound"], Sound)
    assert not found.faults


@pytest.mark.parametrize(
    ("point", "reason"),
    [
        (claim("Missing", module="no_such_module"), "No module named"),
        (claim("Absent"), "no attribute"),
        (claim("NOT_A_CLASS"), "not a subclass of ElementType"),
        (claim("ModuleType"), "not a subclass of ElementType"),
        (claim("Unfinished"), "does not define gradients, load_rule"),
        (claim("Undeclared"), "does not declare name, corners"),
        (claim("OtherName"), "not that of its entry point"),
        (claim("WrongCell"), "vtk_cell_type must be 23"),
        (claim("WrongSides"), "sides must be"),
        (claim("WrongNodes"), "natural_nodes must be"),
        (claim("WrongOrder"), "order 1 or 2"),
        (claim("Raising"), "no licence dongle"),
    ],
    ids=lambda value: value.name if isinstance(value, EntryPoint) else "",
)
def test_a_broken_plug_in_is_reported_and_does_not_hide_the_rest(
    point: EntryPoint, reason: str
) -> None:
    found = registry.load_registry([point, claim("Sound")])
    assert set(found.types) == {"Sound"}
    assert set(found.faults) == {point.name}
    assert reason in found.faults[point.name]
    assert "yard-elements 1.2" in found.faults[point.name]


def test_a_name_with_two_owners_belongs_to_neither_and_both_are_named() -> None:
    twice = [claim("Sound", owner="yard-elements"), claim("Sound", owner="slip-elements")]
    found = registry.load_registry(twice)
    assert not found.types
    assert "slip-elements 1.2" in found.faults["Sound"]
    assert "yard-elements 1.2" in found.faults["Sound"]


@pytest.mark.usefixtures("fresh_registry")
def test_asking_for_a_broken_type_tells_why_it_is_broken(monkeypatch: pytest.MonkeyPatch) -> None:
    points = [claim("Sound"), claim("WrongCell")]
    monkeypatch.setattr(registry, "entry_points", lambda *, group: points)
    with pytest.raises(ElementRegistrationError, match="vtk_cell_type must be 23"):
        registry.get("WrongCell")
    assert list(registry.available()) == ["Sound"]
    assert len(registry.problems()) == 1
