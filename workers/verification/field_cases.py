"""Group 2: closed forms that meshes converge to."""

from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray

from workers.verification.case import Check, Checks, case
from workers.verification.exact import Exact, cantilever, kirsch, lame, waves
from workers.verification.grids import Map, annular, grid
from workers.verification.running import Json, Run, document, run
from workers.verification.solving import (
    Errors,
    measure_errors,
    solve_with,
    solve_with_exact_border,
)

Array = NDArray[np.float64]

ELEMENTS = ("T3", "Q4", "T6", "Q8")
ORDER = {"T3": 1, "Q4": 1, "T6": 2, "Q8": 2}
E, NU = 1000.0, 0.3
# For a model alone: the exact solution takes the place of these.
ANY_SUPPORTS: list[Json] = [{"on": "left", "ux": 0, "uy": 0}]
ANY_LOADS: list[Json] = [{"on": "right", "traction": [1, 0]}]


def _model(name: str, nx: int, ny: int, shape: Map) -> Run:
    return run(
        document(
            grid(name, nx, ny, shape), ANY_SUPPORTS, ANY_LOADS, youngs_modulus=E,
            poissons_ratio=NU,
        )
    )  # fmt: skip


def _errors(made: Run, exact: Exact, u: Array) -> Errors:
    nodal = made.recovery.nodal_stress(u)
    return measure_errors(made.model, exact, u, nodal, made.recovery.field_mesh.connectivity)


def _orders(name: str, coarse: Errors, fine: Errors) -> Iterator[Check]:
    """A priori theory: p in the energy norm, p + 1 in displacement (L2)."""
    for quantity, key, target in (
        ("order of the displacement (L2)", "displacement", ORDER[name] + 1),
        ("order of the stress (energy norm)", "raw", ORDER[name]),
    ):
        order = float(np.log2(getattr(coarse, key) / getattr(fine, key)))
        yield Check(quantity, name, target, order, 0.15, scale=1.0)


# --- manufactured solution -----------------------------------------------------------------------


def _warp(x: Array, y: Array) -> tuple[Array, Array]:
    """A smooth distortion of the unit square by about a tenth."""
    return x + 0.06 * np.sin(3 * x + 2 * y), y + 0.06 * np.cos(2 * x - 3 * y)


@case(
    "Orders of convergence",
    source="Method of manufactured solutions: u = sin 2x cos 1.5y, v = cos x sin 2.5y with the "
    "body force that belongs to it. Orders p + 1 and p: a priori theory (Strang & Fix 1973, "
    "ch. 3).",
    reason="Orders are asymptotic; 0.15 between 12 and 24 elements to a side.",
)
def manufactured() -> Checks:
    exact = waves(E, NU)
    for name in ELEMENTS:
        pair = []
        for cells in (12, 24):
            made = _model(name, cells, cells, _warp)
            pair.append(_errors(made, exact, solve_with_exact_border(made.model, exact)))
        yield from _orders(name, *pair)


# --- cantilever ----------------------------------------------------------------------------------


@case(
    "End-loaded cantilever",
    source="Timoshenko & Goodier, Theory of Elasticity, art. 21: the exact tractions at the loaded "
    "end, the exact displacement at the other.",
    reason="24 x 6 elements: what each element reaches. T3, six to the depth, is honestly poor.",
)
def end_loaded_cantilever() -> Checks:
    length, c, force = 8.0, 1.0, 6.0
    exact = cantilever(E, NU, length, c, force)
    for name, tolerance in (("T3", 0.15), ("Q4", 0.03), ("T6", 3e-3), ("Q8", 3e-3)):
        made = _model(name, 24, 6, lambda x, y: (length * x, c * (2 * y - 1)))
        mesh = made.mesh
        held = np.zeros((mesh.node_count, 2), bool)
        held[mesh.facet_nodes(mesh.sides["left"])] = True
        u = solve_with(made.model, exact, held, mesh.sides["right"])
        tip = made.node(length, 0.0)
        sag = float(exact.displacement(*mesh.nodes[tip])[1])
        yield Check("deflection of the end", name, sag, float(u[tip, 1, 0]), tolerance)
        off = float(np.abs(u[..., 0] - exact.displacement(*mesh.nodes.T)).max()) / sag
        yield Check("u, v anywhere, over the deflection", name, 0.0, off, tolerance, scale=1.0)
        stress = made.recovery.nodal_stress(u)[..., 0]
        true = exact.stress(*made.recovery.field_mesh.points.T)
        for row, quantity in ((0, "sigma_x"), (2, "tau_xy")):
            off = float(np.abs(stress[:, row] - true[:, row]).max() / np.abs(true).max())
            yield Check(
                f"{quantity} anywhere, over the largest stress", name, 0.0, off, tolerance,
                scale=1.0,
            )  # fmt: skip


# --- hole in an infinite plate -------------------------------------------------------------------


def around_a_hole(half: float) -> Map:
    """From a hole of radius 1 to a quarter square, finer towards the hole; x runs outwards."""

    def shape(x: Array, y: Array) -> tuple[Array, Array]:
        angle = np.pi / 2 * y
        outer = half / np.maximum(np.cos(angle), np.sin(angle))
        r = 1 + (outer - 1) * (np.exp(1.5 * x) - 1) / (np.exp(1.5) - 1)
        return r * np.cos(angle), r * np.sin(angle)

    return shape


@case(
    "Round hole in an infinite plate",
    source="Kirsch 1898; Timoshenko & Goodier art. 35: 3 S and -S at the hole. A quarter square "
    "under the exact tractions, held on its two axes of symmetry.",
    reason="32 (linear) or 24 (quadratic) elements to the quarter of the hole: what each element "
    "reaches. Effectivity is the estimated over the true error.",
)
def hole() -> Checks:
    exact = kirsch(E, NU)
    for name, cells, tolerance in (
        ("T3", 32, 0.08), ("Q4", 32, 0.01), ("T6", 24, 0.01), ("Q8", 24, 0.005),
    ):  # fmt: skip
        pair = []
        for n in (cells // 2, cells):
            made = _model(name, n, n, around_a_hole(4.0))
            mesh = made.mesh
            held = np.zeros((mesh.node_count, 2), bool)
            held[mesh.facet_nodes(mesh.sides["bottom"]), 1] = True
            held[mesh.facet_nodes(mesh.sides["top"]), 0] = True
            u = solve_with(made.model, exact, held, mesh.sides["right"])
            pair.append(_errors(made, exact, u))
        stress = made.recovery.nodal_stress(u)[..., 0]
        top, side = stress[made.point(0.0, 1.0), 0], stress[made.point(1.0, 0.0), 1]
        yield Check("stress at the top of the hole over S", name, 3.0, float(top), tolerance)
        yield Check("stress at its side over S", name, -1.0, float(side), 3 * tolerance, scale=1.0)
        yield from _orders(name, *pair)
        effectivity = pair[1].estimate / pair[1].raw
        yield Check(
            "effectivity of the error estimate", name, 1.0, effectivity,
            0.2 if ORDER[name] == 2 else 0.3,
        )  # fmt: skip


# --- ring ----------------------------------------------------------------------------------------


@case(
    "Thick ring under internal pressure",
    source="Lamé; Timoshenko & Goodier art. 28: p (b² + a²)/(b² - a²) and -p at the bore, and its "
    "displacement in plane stress.",
    reason="24 (linear) or 8 (quadratic) elements each way: what each element reaches.",
)
def thick_ring() -> Checks:
    a, b, p, modulus = 10.0, 20.0, 60.0, 210e3
    exact = lame(modulus, NU, a, b, p)
    supports: list[Json] = [{"on": "bottom", "uy": 0}, {"on": "top", "ux": 0}]
    for name, cells, tolerance in (
        ("T3", 24, 0.06), ("Q4", 24, 0.02), ("T6", 8, 0.015), ("Q8", 8, 0.01),
    ):  # fmt: skip
        given = document(
            grid(name, cells, cells, annular(a, b)), supports, [{"on": "left", "pressure": p}],
            poissons_ratio=NU,
        )  # fmt: skip
        solved = run(given)
        radial, hoop, _ = solved.stress[solved.point(a, 0.0), :, 0]
        yield Check("hoop stress at the bore [MPa]", name, 100.0, float(hoop), tolerance)
        yield Check(
            "radial stress at the bore [MPa]", name, -p, float(radial), tolerance, scale=100.0
        )
        moved = float(solved.solution.displacement[solved.node(a, 0.0), 0, 0])
        target = float(exact.displacement(np.array(a), np.array(0.0))[0])
        yield Check("displacement of the bore [mm]", name, target, moved, tolerance / 10)
