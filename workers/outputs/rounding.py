"""Results cleared of rounding for a reader: what is nothing but noise in its state becomes zero.

A force of 1e-10 N beside forces of kilonewtons says nothing about the plate, and a page full of
such numbers hides those that do. The results themselves keep every digit.
"""

from collections.abc import Mapping, Sequence
from math import sqrt
from typing import Any

from workers.job import Job

Json = Mapping[str, Any]

# A stress is rounding below these parts of the state's peak and of the largest Young's modulus.
OF_STATE, OF_MODULUS = 1e-9, 1e-12
STRESSES = ("von_mises", "principal_max", "principal_min", "shear_max")


def settle(job: Job, results: Json) -> dict[str, Any]:
    """The results with zeros for rounding in peaks, places, balances, reactions, probes and cuts.

    Lines and everything that does not belong to a state are the same objects as before.
    """
    stiffest = max(material.youngs_modulus for material in job.materials.values())
    states = {**results["cases"], **results["combinations"]}
    noise = {name: Noise(results, state, stiffest) for name, state in states.items()}
    settled = {name: noise[name].state(state) for name, state in states.items()}
    return {
        **results,
        "cases": {name: settled[name] for name in results["cases"]},
        "combinations": {name: settled[name] for name in results["combinations"]},
        "envelope": {
            quantity: peak and noise[peak["governs"]].peak(quantity, peak)
            for quantity, peak in results["envelope"].items()
        },
        "probes": {
            probe: {state: noise[state].probe(found) for state, found in by_state.items()}
            for probe, by_state in results["probes"].items()
        },
        "cuts": {
            cut: {state: noise[state].cut(found) for state, found in by_state.items()}
            for cut, by_state in results["cuts"].items()
        },
    }


class Noise:
    """The sizes below which the numbers of one state are rounding.

    stress [F/L^2], force [F], moment [F L], displacement [L], place [L]
    """

    def __init__(self, results: Json, state: Json, stiffest: float) -> None:
        regions = results["mesh"]["regions"].values()
        size = sqrt(sum(region["area"] for region in regions))
        thickness = max(region["thickness"] for region in regions)
        self.stress = max(OF_STATE * state["von_mises"]["value"], OF_MODULUS * stiffest)
        self.force = self.stress * thickness * size
        self.moment = self.force * size
        self.place = OF_STATE * size
        self.displacement = max(OF_STATE * state["displacement"]["value"], OF_MODULUS * size)

    def state(self, state: Json) -> dict[str, Any]:
        balance = state["equilibrium"]
        return {
            **state,
            **{q: self.peak(q, state[q]) for q in (*STRESSES, "displacement")},
            "reactions": {
                label: {
                    **reaction,
                    "force": zeroed(reaction["force"], self.force),
                    "moment": zero(reaction["moment"], self.moment),
                    "about": zeroed(reaction["about"], self.place),
                }
                for label, reaction in state["reactions"].items()
            },
            "equilibrium": {
                **balance,
                "applied": self._resultant(balance["applied"]),
                "reaction": self._resultant(balance["reaction"]),
                "about": zeroed(balance["about"], self.place),
            },
        }

    def peak(self, quantity: str, peak: Json) -> dict[str, Any]:
        rounding = {"displacement": self.displacement, "utilisation": 0.0}
        value = zero(peak["value"], rounding.get(quantity, self.stress))
        return {**peak, "value": value, "at": zeroed(peak["at"], self.place)}

    def probe(self, found: Json) -> dict[str, Any]:
        return {
            **found,
            "stress": zeroed(found["stress"], self.stress),
            "von_mises": zero(found["von_mises"], self.stress),
            "displacement": zeroed(found["displacement"], self.displacement),
        }

    def cut(self, found: Json) -> dict[str, Any]:
        normal, shear = zeroed((found["normal"], found["shear"]), self.force)
        moment = zero(found["moment"], self.moment)
        about = zeroed(found["about"], self.place)
        return {**found, "normal": normal, "shear": shear, "moment": moment, "about": about}

    def _resultant(self, values: Sequence[float]) -> list[float]:
        return [*zeroed(values[:2], self.force), zero(values[2], self.moment)]


def zero(value: float, rounding: float) -> float:
    return value if abs(value) > rounding else 0.0


def zeroed(values: Sequence[float], rounding: float) -> list[float]:
    return [zero(value, rounding) for value in values]
