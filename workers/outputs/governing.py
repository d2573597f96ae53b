"""Which of many cases and combinations a reader must see, and the extremes over all of them.

Works on the results object alone.
"""

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from math import sqrt
from typing import Any

Json = Mapping[str, Any]

# Beside what a state's stress amounts to as a force, and beside its stiffness: rounding.
ROUNDING_OF_STATE, ROUNDING_OF_MODULUS = 1e-9, 1e-12


@dataclass(frozen=True)
class Extreme:
    """The largest or smallest value of one component over all states, and whose it is."""

    name: str
    component: str
    value: float
    state: str


def all_states(results: Json) -> dict[str, Json]:
    """Load cases, then combinations, by name."""
    return {**results["cases"], **results["combinations"]}


def governing_states(results: Json) -> dict[str, list[str]]:
    """The states that govern something, with the quantities that they govern."""
    found: dict[str, list[str]] = {}
    for quantity, peak in results["envelope"].items():
        if peak is not None:
            found.setdefault(peak["governs"], []).append(quantity)
    return found


def worth_a_row(results: Json, most: int) -> list[str]:
    """All states in their order where these are few; else those that govern, then the severest."""
    states = all_states(results)
    if len(states) <= most:
        return list(states)
    first = list(governing_states(results))
    rest = sorted(
        (name for name in states if name not in first), key=lambda n: -severity(states[n])
    )
    return (first + rest)[: max(most, len(first))]


def severity(state: Json) -> float:
    """What states are ranked by: utilisation, or where no strength is known the stress."""
    use = state["utilisation"]
    return float(state["von_mises"]["value"] if use is None else use["value"])


def reaction_extremes(results: Json) -> list[Extreme]:
    """The largest and smallest x, y and moment of every support."""
    states = all_states(results)
    supports = dict.fromkeys(label for state in states.values() for label in state["reactions"])
    return [
        extreme
        for label in supports
        for number, component in enumerate(("x", "y", "moment"))
        for extreme in _ends(
            label,
            component,
            {
                name: (*state["reactions"][label]["force"], state["reactions"][label]["moment"])[
                    number
                ]
                for name, state in states.items()
            },
        )
    ]


def cut_extremes(by_state: Json, cut: str) -> list[Extreme]:
    """The largest and smallest normal force, shear and moment of a cut."""
    return [
        extreme
        for component in ("normal", "shear", "moment")
        for extreme in _ends(cut, component, {n: found[component] for n, found in by_state.items()})
    ]


def _ends(name: str, component: str, values: Mapping[str, float]) -> Iterator[Extreme]:
    for pick in (max, min):
        state = pick(values, key=lambda n: values[n])
        yield Extreme(name, component, values[state], state)


def rounding_force(results: Json, state: Json, stiffest: float) -> float:
    """The force below which a sum of nodal forces of this state is nothing but rounding [F].

    stiffest : the largest Young's modulus of the job [F/L^2]
    """
    stress = max(
        ROUNDING_OF_STATE * state["von_mises"]["value"], ROUNDING_OF_MODULUS * stiffest
    )  # fmt: skip
    thickness = max(region["thickness"] for region in results["mesh"]["regions"].values())
    return float(stress * thickness * plate_size(results))


def plate_size(results: Json) -> float:
    """The side of the square of the same area [L]."""
    return sqrt(sum(region["area"] for region in results["mesh"]["regions"].values()))


def settled(values: Sequence[float], rounding: float) -> list[float]:
    """Zero where a value is nothing but rounding."""
    return [value if abs(value) > rounding else 0.0 for value in values]
