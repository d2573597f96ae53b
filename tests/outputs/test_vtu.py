"""What VTK's own reader and filters find in the files that we write."""

from pathlib import Path

import numpy as np
import pytest
from vtkmodules.util.numpy_support import vtk_to_numpy
from vtkmodules.vtkCommonDataModel import vtkUnstructuredGrid
from vtkmodules.vtkFiltersCore import vtkExtractCells
from vtkmodules.vtkFiltersGeneral import vtkGradientFilter
from vtkmodules.vtkFiltersVerdict import vtkCellSizeFilter
from vtkmodules.vtkIOXML import vtkXMLUnstructuredGridReader

from tests.output_samples import (
    NU,
    E,
    fields_of,
    mapped_mesh,
    plain_job,
    quarter_ring,
    rectangle,
)
from workers.analysis.field_mesh import FieldMesh
from workers.analysis.fields import Fields
from workers.cautions import STANDING
from workers.geometry import Region
from workers.outputs.vtu import write_fields


def read(path: Path) -> vtkUnstructuredGrid:
    reader = vtkXMLUnstructuredGridReader()
    reader.SetFileName(str(path))
    reader.Update()
    return reader.GetOutput()


def strings(grid: vtkUnstructuredGrid, name: str) -> list[str]:
    array = grid.GetFieldData().GetAbstractArray(name)
    return [array.GetValue(i) for i in range(array.GetNumberOfValues())]


def cell_gradients(grid: vtkUnstructuredGrid) -> np.ndarray:
    """du/dx, du/dy, dv/dx, dv/dy in each cell, (4, m), by VTK's gradient filter.

    The filter works at cells for cell data and at points for point data: at the points of one
    lone cell it gives that cell's own gradients; their mean is the value at the centre of a
    triangle (constant) and of a bilinear quadrilateral only if undistorted, as here.
    """
    found = []
    for number in range(grid.GetNumberOfCells()):
        one = vtkExtractCells()
        one.SetInputData(grid)
        one.AddCellRange(number, number)
        gradient = vtkGradientFilter()
        gradient.SetInputConnection(one.GetOutputPort())
        gradient.SetInputScalars(0, "displacement")
        gradient.SetResultArrayName("gradient")
        gradient.Update()
        values = vtk_to_numpy(gradient.GetOutput().GetPointData().GetArray("gradient"))
        found.append(values.reshape(-1, 3, 3)[:, :2, :2].mean(axis=0).ravel())
    return np.array(found).T


def hooke(gradients: np.ndarray) -> np.ndarray:
    """(4, m) displacement gradients to (m, 3) plane stress, T&G 3rd edition, art. 16."""
    exx, exy, eyx, eyy = gradients
    factor = E / (1 - NU**2)
    shear = E / (2 * (1 + NU)) * (exy + eyx)
    return np.column_stack((factor * (exx + NU * eyy), factor * (eyy + NU * exx), shear))


def wavy(x, y):
    return 1e-3 * np.sin(x / 40) + 2e-4 * y, 1e-3 * x * y / 200


def stress_like(mesh: FieldMesh):
    x, y = mesh.points.T
    jump = 50.0 * mesh.region  # differs between the regions at one and the same node
    return np.column_stack((x + jump, 2 * y, x * y / 10))


def written(
    tmp_path: Path, element: str, mesh=None
) -> tuple[vtkUnstructuredGrid, FieldMesh, Fields]:
    mesh = mesh or mapped_mesh(
        element,
        (6, 4),
        rectangle(120, 60),
        ("plate", "boss"),
        lambda s, t: (s > 0.5).astype(int),
    )
    job = plain_job(mesh, regions=(Region("boss", thickness=25.0),), title="Lug, revision β")
    field_mesh = FieldMesh.build(mesh)
    fields = fields_of(field_mesh, wavy, stress_like(field_mesh), name="lift, tide +1.2")
    path = tmp_path / "fields.vtu"
    write_fields(path, job, field_mesh, fields, STANDING)
    return read(path), field_mesh, fields


@pytest.mark.parametrize("element", ["T3", "Q4", "T6", "Q8"])
def test_values_come_back_as_written(tmp_path, element):
    """Double precision for places and displacements; single (7 digits) for derived fields."""
    grid, mesh, fields = written(tmp_path, element)
    points, cells = grid.GetPointData(), grid.GetCellData()
    assert np.array_equal(vtk_to_numpy(grid.GetPoints().GetData())[:, :2], mesh.points)
    assert np.array_equal(
        vtk_to_numpy(points.GetArray("displacement")),
        np.column_stack((fields.displacement, np.zeros(mesh.point_count))),
    )
    for name in ("stress", "von_mises", "principal_max", "principal_min", "thickness_strain"):
        found = vtk_to_numpy(points.GetArray(name))
        assert found == pytest.approx(getattr(fields, name), rel=2e-7, abs=1e-12), name
    assert np.array_equal(vtk_to_numpy(points.GetArray("node")), mesh.origin)
    assert vtk_to_numpy(cells.GetArray("error")) == pytest.approx(fields.cell_error[0], rel=2e-7)
    region = vtk_to_numpy(cells.GetArray("region"))
    assert np.array_equal(region, mesh.mesh.blocks[0].region)
    assert np.array_equal(vtk_to_numpy(cells.GetArray("thickness")), np.where(region, 25, 10))


@pytest.mark.parametrize(("element", "cell_type"), [("T3", 5), ("Q4", 9), ("T6", 22), ("Q8", 23)])
def test_cells_have_the_published_vtk_types(tmp_path, element, cell_type):
    """Cell type numbers of the VTK file format: triangle 5, quad 9, quadratic 22 and 23."""
    grid, mesh, _ = written(tmp_path, element)
    assert {grid.GetCellType(i) for i in range(grid.GetNumberOfCells())} == {cell_type}
    first = grid.GetCell(0).GetPointIds()
    found = [first.GetId(i) for i in range(first.GetNumberOfIds())]
    assert found == mesh.connectivity[0][0].tolist()


@pytest.mark.parametrize("element", ["T6", "Q8"])
def test_vtk_sees_the_curved_sides(tmp_path, element):
    """A quarter ring 50-100: area pi/4 (100^2 - 50^2).

    VTK's cell size filter tessellates a quadratic cell, so it stays a little below the circle;
    straight-sided cells of the same corners would miss 4 x 4 % of it.
    """
    mesh = mapped_mesh(element, (3, 4), quarter_ring(50, 100))
    grid, _, _ = written(tmp_path, element, mesh)
    sizes = vtkCellSizeFilter()
    sizes.SetInputData(grid)
    sizes.Update()
    area = vtk_to_numpy(sizes.GetOutput().GetCellData().GetArray("Area")).sum()
    exact = np.pi / 4 * (100**2 - 50**2)
    chords = exact * np.sin(np.pi / 8) / (np.pi / 8)
    assert abs(area - exact) < 0.3 * abs(chords - exact)


def test_a_border_node_is_written_once_for_each_region(tmp_path):
    grid, mesh, _ = written(tmp_path, "Q4")
    node = vtk_to_numpy(grid.GetPointData().GetArray("node"))
    twice = np.flatnonzero(np.bincount(node) == 2)
    assert len(twice) == 5  # 4 divisions across the border x = 60
    assert mesh.mesh.nodes[twice, 0] == pytest.approx(60)
    xx = vtk_to_numpy(grid.GetPointData().GetArray("stress"))[:, 0]
    for number in twice:
        assert np.ptp(xx[node == number]) == pytest.approx(50, rel=1e-6)


@pytest.mark.parametrize("element", ["T3", "Q4"])
def test_vtk_gradients_through_hookes_law_give_the_written_raw_stress(tmp_path, element):
    """VTK's gradient filter differentiates the written displacement in each cell.

    Hooke's law is written out here from Timoshenko & Goodier, Theory of Elasticity, art. 16.
    Single precision of the written stress limits the agreement to 7 digits of the largest.
    """
    grid, _, _ = written(tmp_path, element)
    raw = vtk_to_numpy(grid.GetCellData().GetArray("raw_stress"))
    expected = hooke(cell_gradients(grid))
    assert raw == pytest.approx(expected, abs=3e-7 * float(np.abs(raw).max()))
    assert np.ptp(raw[:, 0]) > 1  # the field is not a constant one


@pytest.mark.parametrize("element", ["T3", "Q4", "T6", "Q8"])
def test_vtk_derivatives_at_the_centre_of_bent_cells_give_the_raw_stress(tmp_path, element):
    """vtkCell.Derivatives with VTK's own shape functions, on a ring of distorted cells.

    Seven digits, as above.
    """
    mesh = mapped_mesh(element, (3, 4), quarter_ring(50, 100))
    grid, _, _ = written(tmp_path, element, mesh)
    displacement = vtk_to_numpy(grid.GetPointData().GetArray("displacement"))
    found = []
    for number in range(grid.GetNumberOfCells()):
        cell = grid.GetCell(number)
        ids = [cell.GetPointId(i) for i in range(cell.GetNumberOfPoints())]
        centre = [0.0, 0.0, 0.0]
        sub = cell.GetParametricCenter(centre)
        derivatives = [0.0] * 6
        cell.Derivatives(sub, centre, displacement[ids, :2].ravel().tolist(), 2, derivatives)
        found.append(np.array(derivatives).reshape(2, 3)[:, :2].ravel())
    raw = vtk_to_numpy(grid.GetCellData().GetArray("raw_stress"))
    assert raw == pytest.approx(hooke(np.array(found).T), abs=3e-7 * float(np.abs(raw).max()))


def test_cautions_units_and_names_travel_with_the_file(tmp_path):
    grid, _, _ = written(tmp_path, "T3")
    cautions = strings(grid, "cautions")
    assert len(cautions) == len(STANDING)
    for line, caution in zip(cautions, STANDING, strict=True):
        assert caution.code in line
        assert caution.message in line
        assert caution.action in line
        assert line.startswith("NOTE ")
    assert "stress: MPa" in strings(grid, "units")
    assert "length: mm" in strings(grid, "units")
    assert strings(grid, "title") == ["Lug, revision β"]
    assert strings(grid, "state") == ["lift, tide +1.2"]
    assert strings(grid, "region_names") == ["plate", "boss"]


def test_data_are_appended_raw_and_compressed(tmp_path):
    written(tmp_path, "Q8")
    head = (tmp_path / "fields.vtu").read_bytes()[:4000].decode("latin-1")
    assert 'compressor="vtkLZ4DataCompressor"' in head
    assert 'format="appended"' in head


def test_a_folder_that_is_not_there_is_an_error(tmp_path, capfd):
    mesh = mapped_mesh("T3", (1, 1), rectangle(1, 1))
    field_mesh = FieldMesh.build(mesh)
    fields = fields_of(field_mesh, wavy, stress_like(field_mesh))
    with pytest.raises(OSError, match="could not be written"):
        write_fields(tmp_path / "no" / "a.vtu", plain_job(mesh), field_mesh, fields, STANDING)
