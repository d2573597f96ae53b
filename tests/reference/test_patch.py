"""Patch test: a constant state of stress comes out exactly, on any mesh of any element.

MacNeal & Harder, "A proposed standard set of problems to test finite element accuracy", Finite
Elements in Analysis and Design 1 (1985): geometry, law and boundary displacements from memory; the
stresses follow from Hooke's law.
"""

import numpy as np
import pytest

from elements.registry import get
from tests.plates import ELEMENTS, plate_job, raw_stress
from workers.analysis.mesh import Block, Mesh
from workers.analysis.solution import solve
from workers.job import Named, Nodes, Support, Traction

E, NU = 1e6, 0.25
CORNERS = np.array(
    [
        *([0, 0], [0.24, 0], [0.24, 0.12], [0, 0.12]),
        *([0.04, 0.02], [0.18, 0.03], [0.16, 0.08], [0.08, 0.08]),
    ]
)
QUADS = [(0, 1, 5, 4), (1, 2, 6, 5), (2, 3, 7, 6), (3, 0, 4, 7), (4, 5, 6, 7)]
# E = 1e6, nu = 0.25, eps = (1, 1, 1) 1e-3: sigma = E/(1 - nu^2) (1 + nu) eps = 4000/3,
# tau = E/(2 (1 + nu)) gamma = 400.
STRESS = np.array([4000 / 3, 4000 / 3, 400.0])
KINDS = (*ELEMENTS, "T3+Q4", "T6+Q8")


def patch_mesh(kind: str) -> Mesh:
    """The five-element patch; triangles are the quadrilaterals cut in two.

    A mixed patch has triangles in its first three quadrilaterals.
    """
    names = kind.split("+")
    cells: dict[str, list[tuple[int, ...]]] = {name: [] for name in names}
    for number, quad in enumerate(QUADS):
        name = names[0] if number < 3 else names[-1]
        a, b, c, d = quad
        cells[name] += [quad] if name[0] == "Q" else [(a, b, c), (a, c, d)]
    nodes = [tuple(p) for p in CORNERS]
    middles: dict[frozenset[int], int] = {}
    blocks = []
    for name in names:
        element = get(name)
        rows = []
        for corners in cells[name]:
            row = list(corners)
            for side in element.sides if element.order == 2 else ():
                ends = frozenset((corners[side[0]], corners[side[1]]))
                if ends not in middles:
                    middles[ends] = len(nodes)
                    nodes.append(tuple(np.mean([nodes[k] for k in ends], axis=0)))
                row.append(middles[ends])
            rows.append(row)
        blocks.append(Block(element, np.array(rows, np.int32), np.zeros(len(rows), np.int32)))
    mesh = Mesh(np.array(nodes), tuple(blocks))
    return Mesh(mesh.nodes, mesh.blocks, sides={"edge": mesh.boundary, **_edges(mesh)})


def _edges(mesh: Mesh) -> dict[str, np.ndarray]:
    middle = mesh.nodes[mesh.facet_ends(mesh.boundary)].mean(axis=1)
    (x, y), tiny = middle.T, 1e-9
    lines = {"left": x < tiny, "right": x > 0.24 - tiny, "bottom": y < tiny, "top": y > 0.12 - tiny}
    return {name: mesh.boundary[chosen] for name, chosen in lines.items()}


def _exact(nodes: np.ndarray) -> np.ndarray:
    x, y = nodes.T
    return 1e-3 * np.column_stack((x + y / 2, y + x / 2))


@pytest.mark.parametrize("kind", KINDS)
def test_prescribed_boundary_gives_the_constant_state(kind: str) -> None:
    mesh = patch_mesh(kind)
    exact = _exact(mesh.nodes)
    supports = [
        Support(f"node {n}", Nodes((int(n),)), ux=exact[n, 0], uy=exact[n, 1])
        for n in mesh.facet_nodes(mesh.boundary)
    ]
    job = plate_job(supports, {"none": []}, youngs_modulus=E, poissons_ratio=NU, thickness=1e-3)
    solution = solve(job, mesh)
    np.testing.assert_allclose(solution.displacement[:, :, 0], exact, atol=1e-16)
    np.testing.assert_allclose(
        raw_stress(solution), np.tile(STRESS, (len(raw_stress(solution)), 1)), rtol=1e-10
    )


@pytest.mark.parametrize("kind", KINDS)
def test_tractions_on_skew_supports_give_the_constant_state(kind: str) -> None:
    """Loaded by its tractions and held at three skew rollers that follow the exact motion."""
    mesh = patch_mesh(kind)
    exact = _exact(mesh.nodes)
    sx, sy, txy = STRESS
    loads = [
        Traction(on=Named(side), start=t, end=t)
        for side, t in {
            "right": (sx, txy),
            "left": (-sx, -txy),
            "top": (txy, sy),
            "bottom": (-txy, -sy),
        }.items()
    ]
    supports = []
    for node, direction in ((0, (0.6, 0.8)), (1, (-0.8, 0.6)), (3, (0.8, 0.6))):
        supports.append(
            Support(
                f"skew {node}",
                Nodes((node,)),
                along=direction,
                displacement=float(exact[node] @ direction),
            )
        )
    job = plate_job(supports, loads, youngs_modulus=E, poissons_ratio=NU, thickness=1e-3)
    solution = solve(job, mesh)
    stress = raw_stress(solution)
    np.testing.assert_allclose(solution.displacement[:, :, 0], exact, atol=1e-14)
    np.testing.assert_allclose(stress, np.tile(STRESS, (len(stress), 1)), rtol=1e-9)
    # The tractions balance by themselves: the rollers carry nothing.
    for support in solution.support_forces:
        np.testing.assert_allclose(support.force, 0, atol=1e-9 * sx * 1e-3 * 0.12)
