"""The job in words, for a reader who has no picture: what holds the plate, and what loads it.

Vectors are written with both components and their signs, and values as they were given.
"""

from collections.abc import Sequence

from workers.geometry import MeshGeometry, OutlineGeometry
from workers.job import (
    Acceleration,
    Bearing,
    BodyForce,
    Box,
    Combination,
    Job,
    LineLoad,
    Load,
    Named,
    Nodes,
    OnCircle,
    PointForce,
    Pressure,
    Segment,
    Shear,
    Spin,
    Spring,
    Support,
    Target,
    TemperatureChange,
    TotalForce,
    TotalMoment,
    Traction,
    Units,
)
from workers.outputs.drawing import numbers
from workers.outputs.drawing.numbers import MINUS, TIMES

GIVEN = 6  # digits of what was given
MOST_NODES = 6  # that are listed by number


def show(value: float) -> str:
    return numbers.show(value, GIVEN)


def vector(place: tuple[float, float]) -> str:
    return numbers.vector(*place, GIVEN)


# --- where ---------------------------------------------------------------------------------------


def target_words(target: Target | None, units: Units) -> str:
    """What a support or load acts on, e.g. "pin" or "the boundary from (0, 0) to (9, 0) mm"."""
    length = units.length
    match target:
        case None:
            return "whole plate"
        case Named(name):
            return name
        case Segment(start, end):
            return f"boundary from {vector(start)} to {vector(end)} {length}"
        case Box(low, high):
            return f"everything in the box {vector(low)} to {vector(high)} {length}"
        case OnCircle(centre, radius):
            return f"boundary on the circle about {vector(centre)}, radius {show(radius)} {length}"
        case Nodes(numbers=chosen):
            return _node_words(chosen)


def _node_words(chosen: Sequence[int]) -> str:
    listed = ", ".join(map(str, chosen[:MOST_NODES]))
    more = f" and {len(chosen) - MOST_NODES} more" if len(chosen) > MOST_NODES else ""
    return f"node{'s' if len(chosen) > 1 else ''} {listed}{more}"


# --- supports ------------------------------------------------------------------------------------


def support_words(job: Job, support: Support) -> str:
    """What a support does, e.g. "ux = 0, uy = 0.1 mm; in case settled, else 0"."""
    length = job.units.length
    named = (("ux", support.ux), ("uy", support.uy), ("normal", support.normal))
    held = [_equals(name, value, length) for name, value in named if value is not None]
    if support.along is not None:
        held.append(_equals(f"along {vector(support.along)}", support.displacement or 0.0, length))
    if support.spring is not None:
        held += _spring_words(job, support.on, support.spring)
    words = ", ".join(held)
    return f"{words}; moved in case {support.case} only" if support.case is not None else words


def _equals(name: str, value: float, unit: str) -> str:
    return f"{name} = {show(value)} {unit}" if value else f"{name} = 0"


def _spring_words(job: Job, target: Target, spring: Spring) -> list[str]:
    given = (
        ("x", spring.x),
        ("y", spring.y),
        ("normal", spring.normal),
        ("tangential", spring.tangential),
    )
    unit = _spring_unit(job, target)
    return [f"spring {way} {show(stiffness)} {unit}" for way, stiffness in given if stiffness]


def _spring_unit(job: Job, target: Target) -> str:
    """Springs are per length along sides, and whole at points."""
    point, side = (f"{job.units.force}/{job.units.length}{power}" for power in ("", "²"))
    if isinstance(target, Named):
        return point if target.name in job.geometry.points else side
    if isinstance(target, Box | Nodes):  # may hold sides, lone nodes, or both
        return f"{side} along sides, {point} at lone nodes"
    return side


# --- loads ---------------------------------------------------------------------------------------


def load_words(load: Load, units: Units) -> str:  # noqa: PLR0911  a table of the kinds
    """One line for a load, e.g. "bearing force (0, 80 000) N"."""
    force, length, stress = units.force, units.length, units.stress
    match load:
        case PointForce():
            return f"force {vector(load.force)} {force}"
        case TotalForce():
            return f"force {vector(load.force)} {force} spread over the side"
        case Bearing():
            return f"bearing force {vector(load.force)} {force}"
        case TotalMoment():
            return f"moment {show(load.moment)} {force}·{length} spread over the side"
        case Traction():
            return f"traction {_run(vector(load.start), vector(load.end))} {stress}"
        case LineLoad():
            return f"line load {_run(vector(load.start), vector(load.end))} {force}/{length}"
        case Pressure():
            return f"pressure {_run(show(load.start), show(load.end))} {stress}"
        case Shear():
            return f"shear {_run(show(load.start), show(load.end))} {stress}"
        case Acceleration():
            return f"acceleration {vector(load.acceleration)} {length}/s²"
        case BodyForce():
            return f"body force {vector(load.force)} {force}/{length}³"
        case Spin():
            return f"spin {show(load.speed)} rad/s about {vector(load.about)} {length}"
        case TemperatureChange():
            return f"temperature change {'+' if load.change > 0 else ''}{show(load.change)} K"
    raise TypeError(f"{type(load).__name__} is not a load")


def _run(start: str, end: str) -> str:
    return start if start == end else f"from {start} to {end}"


def factor_words(combination: Combination) -> str:
    """The factors of a combination, e.g. "1.5 × lift + 1.35 × self weight"."""
    words = ""
    for case, factor in combination.factors.items():
        if factor:
            sign = f" {MINUS} " if factor < 0 else " + "
            words += f"{sign if words or factor < 0 else ''}{show(abs(factor))} {TIMES} {case}"
    return words.strip() or "nothing: all factors are zero"


# --- the plate -----------------------------------------------------------------------------------


def geometry_words(job: Job) -> str:
    """How the plate was described, e.g. "outline of 4 corners with 1 hole"."""
    geometry = job.geometry
    if isinstance(geometry, OutlineGeometry):
        words = f"outline of {_count(len(geometry.outline), 'corner')}"
        holes = f" with {_count(len(geometry.holes), 'hole')}" if geometry.holes else ""
        return words + holes
    if isinstance(geometry, MeshGeometry):
        return "mesh of the client's own"
    return f"{_count(len(geometry.patches), 'mapped patch', 'mapped patches')}"


def _count(number: int, one: str, many: str | None = None) -> str:
    return f"{number} {one if number == 1 else many or one + 's'}"
