"""Small plates for tests: structured meshes of any element type, and jobs on them.

Made without the program's own meshing, so that its faults cannot hide here.
"""

from collections.abc import Callable, Mapping, Sequence

import numpy as np

from elements.registry import get
from workers.analysis.mesh import PLATE, Block, Mesh
from workers.analysis.solution import Solution
from workers.geometry import PatchGeometry, Region
from workers.job import Combination, Job, Load, LoadCase, Material, Plate, Support, Units

ELEMENTS = ("T3", "Q4", "T6", "Q8")
MIXED = ("T3+Q4", "T6+Q8")
Map = Callable[[np.ndarray, np.ndarray], tuple[np.ndarray, np.ndarray]]

# Corners and mid-sides in half steps of a cell; two triangles with alternating diagonals.
_CELL = {
    "Q": [[(0, 0), (2, 0), (2, 2), (0, 2), (1, 0), (2, 1), (1, 2), (0, 1)]],
    "T/": [
        [(0, 0), (2, 0), (2, 2), (1, 0), (2, 1), (1, 1)],
        [(0, 0), (2, 2), (0, 2), (1, 1), (1, 2), (0, 1)],
    ],
    "T\\": [
        [(0, 0), (2, 0), (0, 2), (1, 0), (1, 1), (0, 1)],
        [(2, 0), (2, 2), (0, 2), (2, 1), (1, 2), (1, 1)],
    ],
}


def grid(
    kind: str,
    nx: int,
    ny: int,
    *,
    size: tuple[float, float] = (1.0, 1.0),
    shape: Map | None = None,
    straight: bool = False,
    closed: bool = False,
    region_of_column: Sequence[int] | None = None,
    regions: tuple[str, ...] = (PLATE,),
    shuffle: int | None = None,
) -> Mesh:
    """Mesh of nx by ny cells with sides bottom, right, top, left and points SW, SE, NE, NW.

    kind : element name, or "T3+Q4" for triangles in the left half and quadrilaterals in the right
    shape : moves the nodes, (x, y) -> (x, y); straight puts mid-side nodes on the chords
    closed : join the last column to the first (rings); then only bottom and top exist
    region_of_column : region number of each column of cells
    shuffle : seed that scrambles the node numbers
    """
    names = kind.split("+")
    cells: dict[str, list[list[tuple[int, int]]]] = {name: [] for name in names}
    columns: dict[str, list[int]] = {name: [] for name in names}
    for i in range(nx):
        name = names[0] if len(names) == 1 or i < nx // 2 else names[1]
        for j in range(ny):
            family = "Q" if name[0] == "Q" else ("T/" if (i + j) % 2 else "T\\")
            for local in _CELL[family]:
                corners = 4 if family == "Q" else 3
                count = len(local) if name in ("T6", "Q8") else corners
                period = 2 * nx if closed else 2 * nx + 1
                cells[name].append([((2 * i + a) % period, 2 * j + b) for a, b in local[:count]])
                columns[name].append(i)
    lattice = sorted({point for group in cells.values() for cell in group for point in cell})
    order = np.arange(len(lattice))
    if shuffle is not None:
        order = np.random.default_rng(shuffle).permutation(order)
    number = {point: int(order[k]) for k, point in enumerate(lattice)}
    nodes = np.empty((len(lattice), 2))
    nodes[order] = np.array(lattice) / (2.0 * nx, 2.0 * ny) * size
    blocks = []
    for name in names:
        connectivity = np.array([[number[p] for p in cell] for cell in cells[name]], np.int32)
        column = np.array(columns[name])
        region = np.zeros(len(column), np.int32)
        if region_of_column is not None:
            region = np.asarray(region_of_column, np.int32)[column]
        blocks.append(Block(get(name), connectivity, region))
    if shape is not None:
        nodes = np.column_stack(shape(nodes[:, 0], nodes[:, 1]))
    if straight:
        _straighten(nodes, blocks)
    sides = _sides(blocks, number, nx, ny, closed)
    points = (
        {}
        if closed
        else {
            "SW": number[0, 0],
            "SE": number[2 * nx, 0],
            "NE": number[2 * nx, 2 * ny],
            "NW": number[0, 2 * ny],
        }
    )
    return Mesh(nodes, tuple(blocks), regions, sides, points)


def _straighten(nodes: np.ndarray, blocks: list[Block]) -> None:
    for block in blocks:
        for a, b, *middle in block.element.sides:
            for mid in middle:
                ends = block.connectivity[:, [a, b]]
                nodes[block.connectivity[:, mid]] = nodes[ends].mean(axis=1)


def _sides(
    blocks: list[Block], number: Mapping[tuple[int, int], int], nx: int, ny: int, closed: bool
) -> dict[str, np.ndarray]:
    lines = {"bottom": (1, 0), "top": (1, 2 * ny)}
    if not closed:
        lines |= {"left": (0, 0), "right": (0, 2 * nx)}
    sides = {}
    for name, (axis, value) in lines.items():
        on_line = np.zeros(len(number), bool)
        on_line[[k for point, k in number.items() if point[axis] == value]] = True
        facets = []
        for b, block in enumerate(blocks):
            for s, side in enumerate(block.element.sides):
                found = np.flatnonzero(on_line[block.connectivity[:, list(side)]].all(axis=1))
                facets += [(b, int(e), s) for e in found]
        sides[name] = np.array(facets, np.int32).reshape(-1, 3)
    return sides


def warp(x: np.ndarray, y: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """A smooth distortion of the plane by about a tenth."""
    return x + 0.06 * np.sin(3 * x + 2 * y), y + 0.06 * np.cos(2 * x - 3 * y)


def annulus(inner: float, outer: float) -> Map:
    """Turns the unit square into a ring, x around (counter-clockwise) and y from outside in."""

    def shape(x: np.ndarray, y: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        r, angle = outer + (inner - outer) * y, 2 * np.pi * x
        return r * np.cos(angle), r * np.sin(angle)

    return shape


def ring(kind: str, around: int, through: int, inner: float, outer: float) -> Mesh:
    """A full ring with the sides "bore" and "rim"."""
    mesh = grid(kind, around, through, shape=annulus(inner, outer), closed=True)
    sides = {"rim": mesh.sides["bottom"], "bore": mesh.sides["top"]}
    return Mesh(mesh.nodes, mesh.blocks, mesh.regions, sides)


def plate_job(
    supports: Sequence[Support] = (),
    loads: Sequence[Load] | Mapping[str, Sequence[Load]] = (),
    *,
    youngs_modulus: float = 210e3,
    poissons_ratio: float = 0.3,
    thickness: float = 2.0,
    density: float | None = 7.85e-9,
    thermal_expansion: float | None = 1.2e-5,
    regions: tuple[Region, ...] = (),
    combinations: tuple[Combination, ...] = (),
) -> Job:
    """A job of one material; loads of one case, or of several by name."""
    material = Material("steel", youngs_modulus, poissons_ratio, 355.0, density, thermal_expansion)
    by_case = loads if isinstance(loads, Mapping) else {"load": loads}
    return Job(
        title="test plate",
        units=Units("mm", "N"),
        materials={"steel": material},
        geometry=PatchGeometry((), regions),
        plate=Plate("steel", thickness),
        supports=tuple(supports),
        load_cases=tuple(LoadCase(name, tuple(acting)) for name, acting in by_case.items()),
        combinations=combinations,
    )


def raw_stress(solution: Solution) -> np.ndarray:
    """Stress at the stiffness points of all elements, (points, 3), from the element operators."""
    found = []
    for number, (block, section) in enumerate(
        zip(solution.model.mesh.blocks, solution.model.sections, strict=True)
    ):
        operator = block.element.stress_operator(
            solution.model.mesh.coords(number),
            section.constitutive,
            block.element.stiffness_rule().points,
        )
        u = solution.displacement[block.connectivity][..., 0].reshape(len(operator), -1)
        found.append(np.einsum("mqsd,md->mqs", operator, u).reshape(-1, 3))
    return np.concatenate(found)
