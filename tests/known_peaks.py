"""Plates whose peak stress is known, solved on meshes that an office would make.

Holes and ellipses in infinite plates under the exact tractions of their rims, rings, cantilevers:
all with closed forms. The peak is that of von Mises.
"""

from collections.abc import Iterator
from dataclasses import dataclass

import numpy as np

from tests.exact_solutions import Exact, cantilever, kirsch, lame, solve_with
from tests.plates import Map, grid, plate_job
from workers.analysis.mesh import Mesh
from workers.analysis.model import build_model
from workers.analysis.plane_stress import von_mises
from workers.analysis.recovery import Recovery

E, NU = 1000.0, 0.3


@dataclass(frozen=True, eq=False)
class KnownPeak:
    """A solved plate: displacement (N, 2, 1) and the exact peak."""

    name: str
    recovery: Recovery
    displacement: np.ndarray
    peak: float


def inglis(a: float, b: float) -> Exact:
    """Elliptic hole, half-axes a along x and b along y, in an infinite plate, unit tension along y.

    Inglis 1913; complex potentials as in Muskhelishvili, Some Basic Problems of the Mathematical
    Theory of Elasticity, art. 82a, from memory: checked below against the peak 1 + 2 a / b and
    the free edge.
    """
    R, m = (a + b) / 2, (a - b) / (a + b)
    G, kappa = E / (2 * (1 + NU)), (3 - NU) / (1 + NU)
    e = -1.0  # exp(2 i angle of the pull)

    def potentials(x: np.ndarray, y: np.ndarray):
        z = x + 1j * y
        root = np.sqrt(z * z - 4 * R * R * m + 0j)
        one, other = (z + root) / (2 * R), (z - root) / (2 * R)
        w = np.where(np.abs(one) >= np.abs(other), one, other)
        phi = R / 4 * (w + (2 * e - m) / w)
        d_phi, dd_phi = R / 4 * (1 - (2 * e - m) / w**2), R / 2 * (2 * e - m) / w**3
        d_z, dd_z = R * (1 - m / w**2), 2 * R * m / w**3
        c = (1 + m * m) * (e - m) / m
        psi = -R / 2 * (e * w + e / (m * w) - c * w / (w * w - m))
        d_psi = -R / 2 * (e - e / (m * w * w) + c * (w * w + m) / (w * w - m) ** 2)
        first = d_phi / d_z
        return z, phi, first, (dd_phi * d_z - d_phi * dd_z) / d_z**3, psi, d_psi / d_z

    def displacement(x: np.ndarray, y: np.ndarray) -> np.ndarray:
        z, phi, first, _, psi, _ = potentials(x, y)
        both = (kappa * phi - z * np.conj(first) - np.conj(psi)) / (2 * G)
        return np.stack([both.real, both.imag], axis=-1)

    def stress(x: np.ndarray, y: np.ndarray) -> np.ndarray:
        z, _, first, second, _, third = potentials(x, y)
        total, other = 4 * first.real, 2 * (np.conj(z) * second + third)
        xx, yy = (total - other.real) / 2, (total + other.real) / 2
        return np.stack([xx, yy, other.imag / 2], axis=-1)

    return Exact(displacement, stress)


def known_peaks() -> Iterator[KnownPeak]:
    """Twenty plates."""
    for kind, cells, outer, grading in (
        ("T3", 16, 4.0, 1.5), ("Q4", 12, 5.0, 2.0), ("T6", 6, 4.0, 1.5), ("T6", 10, 6.0, 2.0),
        ("Q8", 5, 3.0, 1.0), ("Q8", 8, 5.0, 2.0),
    ):  # fmt: skip
        mesh = grid(kind, cells, cells, shape=quarter(1.0, 1.0, outer, grading))
        yield symmetric(f"hole, rim {outer:g}, {cells}", mesh, kirsch(E, NU), 3.0)
    for kind, cells, a, b in (
        ("T3", 16, 1.5, 1.0), ("Q4", 16, 2.0, 1.0), ("T6", 12, 2.0, 1.0), ("Q8", 12, 2.0, 1.0),
        ("T6", 16, 3.0, 1.0), ("Q8", 16, 3.0, 1.0), ("Q8", 8, 1.0, 2.0),
    ):  # fmt: skip
        mesh = grid(kind, cells, cells, shape=quarter(a, b, 6 * max(a, b), 2.2))
        yield symmetric(f"ellipse {a:g} : {b:g}, {cells}", mesh, inglis(a, b), 1 + 2 * a / b)
    for kind, cells, outer in (("T3", 12, 2.0), ("Q4", 10, 1.4), ("T6", 8, 3.0), ("Q8", 6, 2.0)):
        exact = lame(E, NU, 1.0, outer, 1.0)
        mesh = grid(kind, cells // 2, cells, shape=quarter(1.0, 1.0, outer, 0.0))
        peak = float(von_mises(exact.stress(np.array([1.0]), np.array([0.0]))[0]))
        yield symmetric(f"ring 1 : {outer:g}, {cells}", mesh, exact, peak)
    for kind, cells, length in (("T3", 8, 8.0), ("Q4", 6, 5.0), ("T6", 3, 8.0)):
        mesh = grid(kind, 4 * cells, cells, size=(length, 2.0), shape=lambda x, y: (x, y - 1))
        yield _cantilever(f"cantilever {length:g} : 2, {cells}", mesh, length)


def quarter(a: float, b: float, outer: float, grading: float) -> Map:
    """The unit square as a quarter plate from an elliptic hole (x = 0) to a round rim."""

    def shape(x: np.ndarray, y: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        s = np.expm1(grading * x) / np.expm1(grading) if grading else x
        cos, sin = np.cos(np.pi / 2 * y), np.sin(np.pi / 2 * y)
        return (a + (outer - a) * s) * cos, (b + (outer - b) * s) * sin

    return shape


def symmetric(name: str, mesh: Mesh, exact: Exact, peak: float) -> KnownPeak:
    """A quarter plate on rollers along both axes, exact tractions on hole and rim."""
    held = np.zeros((mesh.node_count, 2), bool)
    held[mesh.facet_nodes(mesh.sides["bottom"]), 1] = True
    held[mesh.facet_nodes(mesh.sides["top"]), 0] = True
    pulled = np.concatenate((mesh.sides["left"], mesh.sides["right"]))
    return _solved(name, mesh, exact, held, pulled, peak)


def _cantilever(name: str, mesh: Mesh, length: float) -> KnownPeak:
    """Exact displacement at the fixed end, exact shear at the loaded one; peak M c / I."""
    exact = cantilever(E, NU, length, 1.0, 6.0)
    held = np.zeros((mesh.node_count, 2), bool)
    held[mesh.facet_nodes(mesh.sides["left"])] = True
    return _solved(name, mesh, exact, held, mesh.sides["right"], 6.0 * length / (2 / 3))


def _solved(
    name: str, mesh: Mesh, exact: Exact, held: np.ndarray, pulled: np.ndarray, peak: float
) -> KnownPeak:
    model = build_model(plate_job(youngs_modulus=E, poissons_ratio=NU, thickness=1.0), mesh)
    u = solve_with(model, exact, held, pulled)
    element = mesh.blocks[0].element.name
    return KnownPeak(f"{element} {name}", Recovery.build(model), u, peak)
