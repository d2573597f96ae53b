"""Group 1, elements: against VTK's own cells, and against integrals of polynomials in closed form.

VTK is a general reference library here, which has its own shape functions, derivatives and files.
"""

from itertools import product
from math import factorial
from pathlib import Path
from tempfile import TemporaryDirectory
from typing import Any

import numpy as np
from numpy.typing import NDArray
from vtkmodules.util.numpy_support import vtk_to_numpy
from vtkmodules.vtkCommonDataModel import vtkCell, vtkGenericCell
from vtkmodules.vtkIOXML import vtkXMLUnstructuredGridReader

from elements import registry
from elements.contract import ElementType
from workers.analysis.combine import load_states
from workers.analysis.fields import state_fields
from workers.outputs.vtu import write_fields
from workers.verification.case import Check, Checks, case
from workers.verification.grids import annular, grid
from workers.verification.running import Run, document, run

Array = NDArray[np.float64]

ELEMENTS = ("T3", "Q4", "T6", "Q8")
SHEARED = np.array([[1.5, 0.25], [-1 / 3, 1.25]])  # reference shapes become these parallelograms
LAW = np.array([[3, 0.8, 1 / 3], [0.8, 2, 1 / 6], [1 / 3, 1 / 6, 1]])  # nothing in it vanishes
SOFT = 1e-9  # of the largest eigenvalue: below it a motion costs no energy


# --- shape functions -----------------------------------------------------------------------------


def vtk_cell(element: ElementType, nodes: Array) -> vtkGenericCell:
    cell = vtkGenericCell()
    cell.SetCellType(element.vtk_cell_type)
    for number, (x, y) in enumerate(nodes):
        cell.GetPointIds().SetId(number, number)
        cell.GetPoints().SetPoint(number, x, y, 0.0)
    return cell


def parametric(element: ElementType, natural: Array) -> list[float]:
    """VTK's coordinates, from 0 to 1 on quadrilaterals too."""
    r, s = natural if element.is_triangle else (natural + 1) / 2
    return [float(r), float(s), 0.0]


def derivatives(cell: vtkCell, at: list[float], values: Array) -> Array:
    """Of nodal values (n, k) with respect to x and y, (k, 2)."""
    count = values.shape[1]
    found = [0.0] * (3 * count)
    cell.Derivatives(0, at, values.ravel().tolist(), count, found)
    return np.array(found).reshape(count, 3)[:, :2]


@case(
    "Shape functions",
    source="VTK, a general reference library: interpolation and derivatives of its own triangles "
    "and quadrilaterals, at random points of a distorted element.",
    reason="The same polynomials: rounding.",
)
def shape_functions() -> Checks:
    random = np.random.default_rng(3)
    for name in ELEMENTS:
        element = registry.get(name)
        nodes = distorted(element)
        cell, values = vtk_cell(element, nodes), random.normal(size=(element.node_count, 1))
        # Inside a triangle and a quadrilateral alike.
        points = random.uniform(0.05, 0.45, (20, 2))
        weights, slopes = np.zeros((20, element.node_count)), np.zeros((20, 2))
        for row, point in enumerate(points):
            at, own = parametric(element, point), [0.0] * element.node_count
            cell.InterpolateFunctions(at, own)
            weights[row], slopes[row] = own, derivatives(cell, at, values)[0]
        off = float(np.abs(element.shape_functions(points) - weights).max())
        yield Check("difference of the values, worst", name, 0.0, off, 1e-12, scale=1.0)
        G, _ = element.cartesian_gradients(nodes[None], points)
        off = float(np.abs(G[0] @ values[:, 0] - slopes).max() / np.abs(slopes).max())
        yield Check("difference of the derivatives, worst", name, 0.0, off, 1e-10, scale=1.0)


def distorted(element: ElementType) -> Array:
    """The reference shape with its nodes off their places; curved sides where it has mid-sides."""
    nodes = np.array(element.natural_nodes)
    return nodes + 0.08 * np.random.default_rng(20).uniform(-1, 1, nodes.shape)


# --- stiffness -----------------------------------------------------------------------------------


@case(
    "Element stiffness",
    source="Algebra: on triangles and parallelograms with straight sides the integrand is a "
    "polynomial, and the integral of every term is known in closed form. A free body has three "
    "rigid motions in its plane.",
    reason="The rules integrate these polynomials exactly: rounding. No other motion, and no "
    "fewer, may be free, on straight, sheared and curved shapes.",
)
def element_stiffness() -> Checks:
    for name in ELEMENTS:
        element = registry.get(name)
        found = _stiffness(element, element.natural_nodes @ SHEARED)
        exact = exact_stiffness(element)
        size = np.abs(exact).max()
        off = float(np.abs(found - exact).max() / size)
        yield Check("difference from the integral, worst", name, 0.0, off, 1e-12, scale=1.0)
        off = float(np.abs(found - found.T).max() / size)
        yield Check("asymmetry", name, 0.0, off, 1e-12, scale=1.0)
        shapes = {
            "straight": np.array(element.natural_nodes),
            "sheared": element.natural_nodes @ SHEARED,
            "distorted": distorted(element),
        }
        for words, nodes in shapes.items():
            energy = np.linalg.eigvalsh(_stiffness(element, nodes))
            free = int((np.abs(energy) < SOFT * energy[-1]).sum())
            yield Check(f"free motions, {words}", name, 3.0, free, 0.0)


def _stiffness(element: ElementType, nodes: Array) -> Array:
    return np.asarray(element.stiffness(nodes[None], LAW[None], np.ones(1))[0])


def exact_stiffness(element: ElementType) -> Array:
    """Integral of B^T D B over the sheared reference shape, (2n, 2n), thickness 1.

    The derivatives of the shape functions (checked against VTK above) are written as sums of
    r^a s^b, a and b up to two, which hold those of all four elements; products of these are
    integrated term by term.
    """
    powers = list(product(range(3), repeat=2))
    lattice = np.array(list(product((0.0, 0.3, 0.7), repeat=2)))
    terms = np.array([[r**a * s**b for a, b in powers] for r, s in lattice])
    slopes = np.linalg.inv(SHEARED) @ element.gradients(lattice)  # (9, 2, n)
    factors = np.linalg.solve(terms, slopes.reshape(9, -1)).reshape(slopes.shape)
    whole = np.array(
        [[_integral(element, a + c, b + d) for c, d in powers] for a, b in powers]
    ) * abs(np.linalg.det(SHEARED))
    B = np.zeros((9, 3, element.node_count, 2))
    B[:, 0, :, 0] = B[:, 2, :, 1] = factors[:, 0]
    B[:, 1, :, 1] = B[:, 2, :, 0] = factors[:, 1]
    rows = B.reshape(9, 3, -1)
    return np.asarray(np.einsum("pim,ij,pq,qjn->mn", rows, LAW, whole, rows, optimize=True))


def _integral(element: ElementType, a: int, b: int) -> float:
    """Of r^a s^b over the reference triangle (0..1) or square (-1..1)."""
    if element.is_triangle:
        return factorial(a) * factorial(b) / factorial(a + b + 2)
    return 0.0 if a % 2 or b % 2 else 4 / ((a + 1) * (b + 1))


# --- strain --------------------------------------------------------------------------------------


@case(
    "Strain by another hand",
    source="VTK reads the written file and differentiates the displacement with its own shape "
    "functions; Hooke's law as in Timoshenko & Goodier, Theory of Elasticity, art. 16.",
    reason="Stress is written with seven digits.",
)
def strain() -> Checks:
    E, nu = 210e3, 0.3
    held, pull = (
        [{"on": "bottom", "uy": 0}, {"on": "top", "ux": 0}],
        [{"on": "left", "pressure": 9}],
    )
    for name in ELEMENTS:
        solved = run(
            document(grid(name, 4, 6, annular(50, 100)), held, pull, youngs_modulus=E,
                     poissons_ratio=nu)
        )  # fmt: skip
        written, gradient = _read_back(solved)
        xx, shear, yy = gradient[:, 0, 0], gradient[:, 0, 1] + gradient[:, 1, 0], gradient[:, 1, 1]
        stress = np.column_stack((xx + nu * yy, yy + nu * xx, (1 - nu) / 2 * shear))
        stress *= E / (1 - nu**2)
        off = float(np.abs(stress - written).max() / np.abs(stress).max())
        yield Check("difference of the elements' stress, worst", name, 0.0, off, 1e-6, scale=1.0)


def _read_back(solved: Run) -> tuple[Array, Any]:
    """From the file: raw stress (m, 3), and gradients of the displacement (m, 2, 2), both at the
    centres of the elements.
    """
    fields = state_fields(solved.solution, solved.recovery, load_states(solved.job), "load")
    with TemporaryDirectory() as folder:
        path = Path(folder) / "fields.vtu"
        write_fields(path, solved.job, solved.recovery.field_mesh, fields, [])
        reader = vtkXMLUnstructuredGridReader()
        reader.SetFileName(str(path))
        reader.Update()
    made = reader.GetOutput()
    displacement = vtk_to_numpy(made.GetPointData().GetArray("displacement"))[:, :2]
    gradients = []
    for number in range(made.GetNumberOfCells()):
        cell, centre = made.GetCell(number), [0.0, 0.0, 0.0]
        cell.GetParametricCenter(centre)
        ids = [cell.GetPointId(i) for i in range(cell.GetNumberOfPoints())]
        gradients.append(derivatives(cell, centre, displacement[ids]))
    raw = vtk_to_numpy(made.GetCellData().GetArray("raw_stress")).astype(float)
    return raw, np.array(gradients)
