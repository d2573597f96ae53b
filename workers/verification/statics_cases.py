"""Group 1, statics: reactions and cuts against hand sums, for every load and every support."""

import numpy as np

from workers.verification.case import Check, Checks, case
from workers.verification.grids import grid, rectangle
from workers.verification.running import Json, Run, document, run

ELEMENTS = ("T3", "Q4", "T6", "Q8")

LENGTH, HEIGHT, THICKNESS, DENSITY = 10.0, 4.0, 2.0, 3.0
# Loads on a plate 10 x 4 x 2, its lower left corner at the origin, and their force and moment about
# the origin, by hand. Its volume is 80, its centroid (5, 2), its mass 240.
LOADS: dict[str, tuple[Json, tuple[float, float, float]]] = {
    "force": ({"on": "NE", "force": [3, -7]}, (3, -7, -7 * 10 - 3 * 4)),
    "total force": ({"on": "right", "total_force": [5, 8]}, (5, 8, 8 * 10 - 5 * 2)),
    "total moment": ({"on": "right", "total_moment": 25}, (0, 0, 25)),
    "traction": ({"on": "top", "traction": [2, -3]}, (40, -60, -60 * 5 - 40 * 4)),
    "pressure, 0 to 6": (
        {"on": "right", "pressure": {"from": 0, "to": 6}},
        (-24, 0, 24 * 4 * 2 / 3),
    ),
    "shear": ({"on": "right", "shear": 4}, (0, 32, 320)),
    "line load": ({"on": "top", "line_load": [0, -5]}, (0, -50, -250)),
    "acceleration": ({"acceleration": [0, -9]}, (0, -2160, -2160 * 5)),
    "body force": ({"body_force": [1, 2]}, (80, 160, 160 * 5 - 80 * 2)),
    "spin about (4, 1)": (
        {"spin": {"about": [4, 1], "speed": 2}},
        (960, 960, 960 * (4 * 2 - 1 * 5)),
    ),
    "temperature": ({"temperature_change": 30}, (0, 0, 0)),
}
# Force of the heating where it is held, E alpha dT over a section: the size of that load.
LEAST = {"temperature": 210e3 * 1.2e-5 * 30 * HEIGHT * THICKNESS}
SUPPORTS: dict[str, list[Json]] = {
    "fixed side": [{"on": "left", "ux": 0, "uy": 0}],
    "roller and pin": [{"on": "left", "normal": 0}, {"on": "SW", "uy": 0}],
    "skew rollers": [
        {"on": "SW", "along": [1, 1]},
        {"on": "SE", "along": [1, -2]},
        {"on": "NW", "along": [1, 0]},
    ],
    "springs": [{"on": "left", "spring": {"x": 5e4, "y": 2e4}}, {"on": "SE", "spring": {"y": 3e4}}],
    "settlement": [{"on": "left", "ux": 0, "uy": 0}, {"on": "SE", "uy": -0.02}],
    "bedding": [{"on": "bottom", "spring": {"normal": 5e4, "tangential": 5e3}}],
}


def _plate(
    name: str, supports: list[Json], loads: dict[str, list[Json]], requests: Json | None = None
) -> Run:
    return run(
        document(
            grid(name, 6, 3, rectangle(LENGTH, HEIGHT)), supports, loads,
            thickness=THICKNESS, density=DENSITY, requests=requests or {},
        )
    )  # fmt: skip


def reaction(solved: Run, state: str) -> np.ndarray:
    """Force and moment about the origin of all supports together, (3,), from the results."""
    total = np.zeros(3)
    for support in solved.results["cases"][state]["reactions"].values():
        (fx, fy), (x, y) = support["force"], support["about"]
        total += [fx, fy, support["moment"] + x * fy - y * fx]
    return total


def imbalance(
    solved: Run, state: str, force: tuple[float, float, float], least: float = 1.0
) -> float:
    """What applied forces (by hand) and reactions leave, over the size of the load or the least."""
    size = max(np.hypot(force[0], force[1]) * LENGTH, abs(force[2]), least)
    arm = np.array([LENGTH, LENGTH, 1.0])
    return float(np.abs((reaction(solved, state) + force) * arm).max() / size)


@case(
    "Equilibrium",
    source="Statics: the supports carry what the loads add up to by hand, in x, y and moment.",
    reason="1e-9 of the load, for every load, support and built-in element.",
)
def equilibrium() -> Checks:
    cases = {name: [load] for name, (load, _) in LOADS.items()}
    left = dict.fromkeys(LOADS, 0.0)
    for name in ELEMENTS:
        for supports in SUPPORTS.values():
            solved = _plate(name, supports, cases)
            for load, (_, force) in LOADS.items():
                off = imbalance(solved, load, force, LEAST.get(load, 1.0))
                left[load] = max(left[load], off)
    for load, computed in left.items():
        quantity = f"{load}: load and reactions, worst of {len(SUPPORTS)} supports"
        yield Check(quantity, ", ".join(ELEMENTS), 0.0, computed, 1e-9, scale=1.0)


@case(
    "Bearing load on a plate from an outline",
    source="Statics: a pin's force acts through the centre of its hole.",
    reason="1e-9 of the load on whatever mesh the free mesher makes.",
)
def bearing() -> Checks:
    corners = [[0, 0], [LENGTH, 0], [LENGTH, HEIGHT], [0, HEIGHT]]
    geometry: Json = {
        "outline": [
            {"at": at, "side": side}
            for at, side in zip(corners, ("bottom", "right", "top", "left"), strict=True)
        ],
        "holes": [{"name": "pin", "circle": {"centre": [7, 2], "radius": 1}}],
    }
    for name in ELEMENTS:
        solved = run(
            document(
                geometry, SUPPORTS["fixed side"], {"pin": [{"on": "pin", "bearing": [3, 5]}]},
                thickness=THICKNESS, meshing={"element": name},
            )
        )  # fmt: skip
        computed = imbalance(solved, "pin", (3.0, 5.0, 7 * 5 - 2 * 3))
        yield Check("load and reactions", name, 0.0, computed, 1e-9, scale=1.0)


@case(
    "Section forces",
    source="Statics: what lies to the right of a cut is balanced by the cut.",
    reason="1e-9, because cuts are made of the nodal forces that the equations were solved for.",
)
def section_forces() -> Checks:
    x, fx, fy = 3.3, 5.0, 8.0
    cuts: Json = {"cuts": {"cut": {"from": [x, 0], "to": [x, HEIGHT]}}}
    loads = {"end": [{"on": "right", "total_force": [fx, fy]}]}
    for name in ELEMENTS:
        solved = _plate(name, SUPPORTS["fixed side"], loads, requests=cuts)
        found = solved.results["cuts"]["cut"]["end"]
        targets = {"normal": fx, "shear": fy, "moment": fy * (LENGTH - x)}
        for quantity, target in targets.items():
            yield Check(f"{quantity} at x = {x}", name, target, found[quantity], 1e-9)
