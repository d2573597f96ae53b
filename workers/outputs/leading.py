"""Which of many cases and combinations a reader must see, and the extremes over all of them.

Works on the results object alone.
"""

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from typing import Any

Json = Mapping[str, Any]


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
    by_support: dict[str, dict[str, Json]] = {}
    for name, state in all_states(results).items():
        for label, reaction in state["reactions"].items():
            x, y = reaction["force"]
            carried = {"x": x, "y": y, "moment": reaction["moment"]}
            by_support.setdefault(label, {})[name] = carried
    return [
        extreme
        for label, by_state in by_support.items()
        for extreme in extremes(label, by_state, ("x", "y", "moment"))
    ]


def extremes(name: str, by_state: Json, components: Sequence[str]) -> Iterator[Extreme]:
    """The largest and the smallest of each component of something."""
    for component in components:
        for pick in (max, min):
            state = pick(by_state, key=lambda s: by_state[s][component])
            yield Extreme(name, component, by_state[state][component], state)
