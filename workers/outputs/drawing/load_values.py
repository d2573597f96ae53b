"""What a load is in words, and as vectors along a side, ready to be drawn.

Combinations scale the loads of their cases by a factor; what is shown is the scaled value.
"""

from functools import singledispatch
from typing import Any

import numpy as np
from numpy.typing import NDArray

from workers.geometry import Vector
from workers.job import (
    Acceleration,
    Bearing,
    BodyForce,
    LineLoad,
    Load,
    Named,
    PointForce,
    Pressure,
    Shear,
    Spin,
    TemperatureChange,
    TotalForce,
    TotalMoment,
    Traction,
    Units,
)
from workers.outputs.drawing import numbers
from workers.outputs.drawing.numbers import TIMES

DIGITS = 5  # a load is given, so it is shown as given


def show(value: float) -> str:
    return numbers.show(value, DIGITS)


def vector(x: float, y: float) -> str:
    return numbers.vector(x, y, DIGITS)


Array = NDArray[np.floating[Any]]
Varying = Traction | LineLoad | Pressure | Shear  # the loads that have a start and an end


def target_name(load: Load, whole: str = "whole plate") -> str:
    """The name of what a load acts on; "" for a selector, which the picture shows."""
    if load.on is None:
        return whole
    return load.on.name if isinstance(load.on, Named) else ""


# --- in words ------------------------------------------------------------------------------------


def describe(load: Load, factor: float, units: Units) -> str:  # noqa: PLR0911  a table of the kinds
    """One line for a load, e.g. "pressure 5 MPa"."""
    force, length = units.force, units.length
    match load:
        case PointForce():
            return _vector(load.force, factor, force)
        case TotalForce():
            return f"total {_vector(load.force, factor, force)}"
        case Bearing():
            return f"bearing {_vector(load.force, factor, force)}"
        case TotalMoment():
            return f"moment {show(factor * load.moment)} {force}·{length}"
        case LineLoad():
            return f"line load {_constant(load, factor, units)}".strip()
        case Traction() | Pressure() | Shear():
            return f"{type(load).__name__.lower()} {_constant(load, factor, units)}".strip()
        case Acceleration():
            return f"acceleration {_vector(load.acceleration, factor, f'{length}/s²')}"
        case BodyForce():
            return f"body force {_vector(load.force, factor, f'{force}/{length}³')}"
        case Spin():
            times = "" if factor == 1 else f", its forces {TIMES} {show(factor)}"
            return f"spin {show(load.speed)} rad/s about {vector(*load.about)} {length}{times}"
        case TemperatureChange():
            change = factor * load.change
            return f"temperature {'+' if change > 0 else ''}{show(change)} K"
    raise TypeError(f"{type(load).__name__} is not a load")


def _vector(v: Vector, factor: float, unit: str) -> str:
    """A vector on an axis by its size (the arrow shows the way), any other by its components."""
    x, y = factor * v[0], factor * v[1]
    if x == 0 or y == 0:
        return f"{show(abs(x + y))} {unit}"
    return f"{vector(x, y)} {unit}"


def _constant(load: Varying, factor: float, units: Units) -> str:
    """The value of an even load; nothing for one that varies, which is labelled at its ends."""
    return "" if varies(load) else end_values(load, factor, units)[0]


def varies(load: Load) -> bool:
    return isinstance(load, Varying) and load.start != load.end


def end_values(load: Varying, factor: float, units: Units) -> tuple[str, str]:
    """The values of a load at the start and at the end of its side."""
    unit = f"{units.force}/{units.length}" if isinstance(load, LineLoad) else units.stress
    if isinstance(load, Pressure | Shear):
        start, end = (f"{show(factor * value)} {unit}" for value in (load.start, load.end))
    else:
        start, end = (_vector(value, factor, unit) for value in (load.start, load.end))
    return start, end


# --- as vectors along a side ---------------------------------------------------------------------


@singledispatch
def along_side(load: Load, outward: Array, part: Array) -> Array:
    """The direction and relative size of a load at places on a side, (k, 2).

    outward : (k, 2) unit normals away from the material; part : (k,) of the length of the side.
    """
    raise TypeError(f"a {type(load).__name__} does not act on sides")


@along_side.register(TotalForce)
def _(load: TotalForce, outward: Array, part: Array) -> Array:
    return np.broadcast_to(np.array(load.force), outward.shape)


@along_side.register(Traction)
@along_side.register(LineLoad)
def _(load: Traction | LineLoad, outward: Array, part: Array) -> Array:
    start, end = np.array(load.start), np.array(load.end)
    return (1 - part)[:, None] * start + part[:, None] * end


@along_side.register(Pressure)
def _(load: Pressure, outward: Array, part: Array) -> Array:
    return -((1 - part) * load.start + part * load.end)[:, None] * outward


@along_side.register(Shear)
def _(load: Shear, outward: Array, part: Array) -> Array:
    tangent = np.column_stack((-outward[:, 1], outward[:, 0]))
    return ((1 - part) * load.start + part * load.end)[:, None] * tangent


@along_side.register(Bearing)
def _(load: Bearing, outward: Array, part: Array) -> Array:
    size = np.hypot(*load.force)
    pressed = np.maximum(0.0, -outward @ np.array(load.force) / size) if size else 0 * part
    return -size * pressed[:, None] * outward


@along_side.register(TotalMoment)
def _(load: TotalMoment, outward: Array, part: Array) -> Array:
    # With the material on the left, a push into it at the start and a pull at the end turns the
    # side clockwise as seen from its middle.
    return load.moment * (1 - 2 * part)[:, None] * outward
