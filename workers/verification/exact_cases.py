"""Group 1: cases whose answer is exact, to rounding."""

from typing import Any

import numpy as np

from elements import registry
from elements.conformance import check as conformance
from workers.analysis.combine import load_states
from workers.analysis.fields import state_fields
from workers.analysis.solution import solve
from workers.verification.case import Check, Checks, case
from workers.verification.grids import Map, grid, rectangle
from workers.verification.running import Json, Run, document, run, worst

ELEMENTS = ("T3", "Q4", "T6", "Q8")
MIXED = ("T3+Q4", "T6+Q8")
ROLLERS: list[Json] = [{"on": "left", "ux": 0}, {"on": "SW", "uy": 0}]


def warped(length: float, height: float) -> Map:
    """A rectangle whose inside is distorted and whose sides stay straight."""

    def shape(x: Any, y: Any) -> tuple[Any, Any]:
        bump = x * (1 - x) * y * (1 - y)
        return length * (x + 0.9 * bump * (y - 0.3)), height * (y + 0.8 * bump * (0.6 - x))

    return shape


@case(
    "Element types",
    source="Properties that every displacement element must have: partition of unity, rigid "
    "motions, rank, symmetry, patch test, resultants, order of convergence (any textbook).",
    reason="No failure is allowed; plug-ins are checked as well.",
)
def element_types() -> Checks:
    for name, element in sorted(registry.available().items()):
        failures = len(conformance(element))
        yield Check("failures of the conformance kit", name, 0.0, failures, 0.0, scale=1.0)


# --- patch test ----------------------------------------------------------------------------------

_CORNERS = ((0.0, 0.0), (0.24, 0.0), (0.24, 0.12), (0.0, 0.12))
_INNER = ((0.04, 0.02), (0.18, 0.03), (0.16, 0.08), (0.08, 0.08))
_QUADS = [(0, 1, 5, 4), (1, 2, 6, 5), (2, 3, 7, 6), (3, 0, 4, 7), (4, 5, 6, 7)]


def patch(kinds: str) -> Json:
    """The five-element patch; triangles are quadrilaterals cut in two, in mixed patches three."""
    names = kinds.split("+")
    nodes = [np.array(xy, float) for xy in _CORNERS + _INNER]
    middle: dict[frozenset[int], int] = {}
    rows: dict[str, list[list[int]]] = {name: [] for name in names}
    for number, quad in enumerate(_QUADS):
        name = names[0] if number < 3 else names[-1]
        a, b, c, d = quad
        for corners in [(a, b, c), (a, c, d)] if name[0] == "T" else [quad]:
            row = list(corners)
            for side in registry.get(name).sides if registry.get(name).order == 2 else ():
                ends = corners[side[0]], corners[side[1]]
                key = frozenset(ends)
                if key not in middle:
                    middle[key] = len(nodes)
                    nodes.append((nodes[ends[0]] + nodes[ends[1]]) / 2)
                row.append(middle[key])
            rows[name].append(row)
    edges = {"bottom": (0, 1), "right": (1, 2), "top": (2, 3), "left": (3, 0)}
    mids = {name: middle.get(frozenset(ends)) for name, ends in edges.items()}
    return {
        "mesh": {
            "nodes": [node.tolist() for node in nodes],
            "blocks": [{"element": n, "connectivity": r} for n, r in rows.items()],
            "sides": {
                name: [[*ends, *([] if mids[name] is None else [mids[name]])]]
                for name, ends in edges.items()
            },
        }
    }


def _patch_document(kinds: str, supports: list[Json], loads: list[Json]) -> Json:
    return document(
        patch(kinds), supports, loads, units=("in", "lbf"),
        youngs_modulus=1e6, poissons_ratio=0.25, thickness=0.001,
    )  # fmt: skip


def _exact_patch(x: float, y: float) -> tuple[float, float]:
    return 1e-3 * (x + y / 2), 1e-3 * (y + x / 2)


# E/(1 - nu) 1e-3 = 4000/3 both ways, E/(2 (1 + nu)) 1e-3 = 400.
PATCH_STRESS = np.array([4000 / 3, 4000 / 3, 400.0])


def _patch_check(kinds: str, how: str, solved: Run) -> Check:
    computed = worst(solved.raw_stress[..., 0] / PATCH_STRESS, 1.0)
    return Check(f"stress over its target, worst: {how}", kinds, 1.0, computed, 1e-9)


@case(
    "Patch test",
    source="MacNeal & Harder, Finite Elements in Analysis and Design 1 (1985), geometry from "
    "memory; sigma_x = sigma_y = 1333.33, tau_xy = 400 follow from Hooke's law.",
    reason="A constant state of stress must come out exactly; 1e-9 is rounding.",
)
def patch_test() -> Checks:
    for kinds in (*ELEMENTS, *MIXED):
        geometry = patch(kinds)["mesh"]
        border = {n for side in geometry["sides"].values() for row in side for n in row}
        held = []
        for node in sorted(border):
            ux, uy = _exact_patch(*geometry["nodes"][node])
            held.append({"on": {"nodes": [node]}, "ux": ux, "uy": uy})
        solved = run(_patch_document(kinds, held, []))
        yield _patch_check(kinds, "moved border", solved)
        yield _patch_check(kinds, "tractions, skew supports", run(_pulled_patch(kinds)))


def _pulled_patch(kinds: str) -> Json:
    s, _, t = PATCH_STRESS.tolist()
    tractions = {"right": [s, t], "left": [-s, -t], "top": [t, s], "bottom": [-t, -s]}
    skew = []
    for node, (dx, dy) in ((0, (0.6, 0.8)), (1, (-0.8, 0.6)), (3, (0.8, 0.6))):
        ux, uy = _exact_patch(*_CORNERS[node])
        skew.append({"on": {"nodes": [node]}, "along": [dx, dy], "displacement": ux * dx + uy * dy})
    loads = [{"on": side, "traction": traction} for side, traction in tractions.items()]
    return _patch_document(kinds, skew, loads)


# --- one-dimensional and uniform states ----------------------------------------------------------


@case(
    "Bar under its own weight",
    source="E u'' + f = 0, fixed-free: u = f (L x - x²/2) / E with nu = 0.",
    reason="Quadratic elements hold the solution, linear ones have it at their nodes on a bar one "
    "element wide: rounding. T3 loads the two corners of an end unequally; the mean is exact.",
)
def bar() -> Checks:
    length, width, t, E, density, a = 8.0, 1.0, 2.0, 200.0, 1.5, 0.2
    f = density * a
    for name in ELEMENTS:
        solved = run(
            document(
                grid(name, 5, 1, rectangle(length, width)), ROLLERS, [{"acceleration": [a, 0]}],
                youngs_modulus=E, poissons_ratio=0.0, thickness=t, density=density,
            )
        )  # fmt: skip
        tip = float(solved.moved("right")[0, 0])
        yield Check("displacement of the free end", name, f * length**2 / (2 * E), tip, 1e-10)
        held = solved.results["cases"]["load"]["reactions"]["left"]["force"][0]
        yield Check("reaction", name, -f * length * width * t, held, 1e-10)


@case(
    "Heating, free and restrained",
    source="Hooke's law with thermal strain: no stress, and -E alpha dT / (1 - nu) both ways.",
    reason="Rounding; the free plate against the restrained stress.",
)
def heating() -> Checks:
    E, nu, alpha, change = 210e3, 0.3, 1.2e-5, 80.0
    pressed = -E * alpha * change / (1 - nu)
    warm = [{"temperature_change": change}]
    for kinds in (*ELEMENTS, *MIXED):
        geometry = grid(kinds, 4, 3, warped(4.0, 3.0))
        free = run(
            document(geometry, [{"on": "SW", "ux": 0, "uy": 0}, {"on": "SE", "uy": 0}], warm)
        )
        computed = worst(free.raw_stress, 0.0)
        yield Check("largest stress [MPa], free", kinds, 0.0, computed, 1e-9, scale=-pressed)
        sides = ("bottom", "right", "top", "left")
        held = run(document(geometry, [{"on": side, "normal": 0} for side in sides], warm))
        for row, name in enumerate(("sigma_x", "sigma_y")):
            computed = worst(held.raw_stress[:, row], pressed)
            yield Check(f"{name} [MPa], worst point, held", kinds, pressed, computed, 1e-9)


@case(
    "Plane stress",
    source="Hooke's law with sigma_z = 0: strains sigma/E along a pull, -nu sigma/E across it and "
    "through the thickness.",
    reason="A uniform state: rounding.",
)
def plane_stress() -> Checks:
    E, nu, sigma, length, height = 210e3, 0.3, 100.0, 10.0, 4.0
    for name in ELEMENTS:
        solved = run(
            document(
                grid(name, 4, 2, warped(length, height)), ROLLERS,
                [{"on": "right", "traction": [sigma, 0]}], youngs_modulus=E, poissons_ratio=nu,
            )
        )  # fmt: skip
        u, v = solved.solution.displacement[solved.node(length, height), :, 0]
        yield Check("strain along the pull", name, sigma / E, u / length, 1e-9)
        yield Check("strain across", name, -nu * sigma / E, v / height, 1e-9)
        fields = state_fields(solved.solution, solved.recovery, load_states(solved.job), "load")
        thinner = worst(np.asarray(fields.thickness_strain), -nu * sigma / E)
        yield Check("strain through the thickness, worst", name, -nu * sigma / E, thinner, 1e-9)


@case(
    "Linear algebra",
    source="SciPy's SuperLU, a general sparse solver, on the same equations.",
    reason="Both are backward stable; the plate is well conditioned: 1e-9 of the largest "
    "displacement.",
)
def linear_algebra() -> Checks:
    pull = [{"on": "right", "traction": [3, 5]}]
    for kinds in ("T3", "Q8", "T6+Q8"):
        held = [{"on": "left", "ux": 0, "uy": 0}]
        made = run(document(grid(kinds, 24, 16, warped(6.0, 4.0)), held, pull))
        own = made.solution.displacement
        other = solve(made.job, made.mesh, method="superlu").displacement
        computed = float(np.abs(own - other).max() / np.abs(other).max())
        quantity = "difference in displacement, over the largest"
        yield Check(quantity, kinds, 0.0, computed, 1e-9, scale=1.0)
