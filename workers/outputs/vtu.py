"""The fields of one state as a VTK XML file, for any viewer that reads the open format.

Points are those of the `FieldMesh` (a node on the border of two regions is there once for each),
so that a stress is never smeared over a change of thickness or material. Appended raw data with
LZ4: measured ten times faster than zlib for files a third larger.
"""

import errno
import os
from collections.abc import Iterable, Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np
from numpy.typing import NDArray
from vtkmodules.util.numpy_support import numpy_to_vtk
from vtkmodules.vtkCommonCore import vtkDataArray, vtkPoints, vtkStringArray
from vtkmodules.vtkCommonDataModel import vtkCellArray, vtkFieldData, vtkUnstructuredGrid
from vtkmodules.vtkCommonMisc import vtkErrorCode
from vtkmodules.vtkIOXML import vtkXMLUnstructuredGridWriter

from workers.analysis.envelope import Envelope
from workers.analysis.field_mesh import FieldMesh
from workers.analysis.fields import Fields
from workers.cautions import Caution
from workers.job import Job, Units

STRESS_COMPONENTS = ("xx", "yy", "xy")
MAGNITUDE = "displacement_magnitude"  # of a vector: not to be taken for one
# Single precision knows 1e-38 to 3e38; seven orders below a largest value of 1e-30 are still there.
LEAST_SINGLE, MOST_SINGLE = 1e-30, 1e38


def write_fields(
    path: Path, job: Job, field_mesh: FieldMesh, fields: Fields, cautions: Sequence[Caution]
) -> None:
    """Write one state of a job.

    Point data: displacement (double, 3 components) [L]; stress (xx, yy, xy), von_mises,
    principal_max, principal_min, shear_max [F/L^2] and thickness_strain (single precision, half
    the size, seven digits); node, the number of the mesh node. Cell data: raw_stress, the
    element's own stress at its centre, and error [F/L^2]; region; thickness [L]. Field data:
    title, state, cautions, units, region_names (strings).

    Raises
    ------
    OSError   the file could not be written completely.
    """
    grid = _grid(field_mesh)
    _add_point_data(grid, field_mesh, fields)
    raw = _single(np.concatenate(fields.cell_stress))
    cells = grid.GetCellData()
    cells.AddArray(_array(raw, "raw_stress", STRESS_COMPONENTS))
    cells.AddArray(_array(_single(np.concatenate(fields.cell_error)), "error"))
    _add_section(grid, job, field_mesh)
    _add_strings(grid.GetFieldData(), "state", [fields.name])
    _add_facts(grid, job, field_mesh, cautions)
    _write(path, grid)


def write_envelope(
    path: Path,
    job: Job,
    field_mesh: FieldMesh,
    envelope: Envelope,
    names: Sequence[str],
    cautions: Sequence[Caution],
) -> None:
    """Write the worst of all states at every point, and which state that is.

    Point data: von_mises, principal_max, principal_min, shear_max [F/L^2] and
    displacement_magnitude [L] (single precision); for each of them NAME_governs, the number of the
    state in the field data `states`; node. Cell and field data as in `write_fields`.

    Raises
    ------
    OSError   the file could not be written completely.
    """
    grid = _grid(field_mesh)
    data = grid.GetPointData()
    for measure, values in envelope.value.items():
        name = MAGNITUDE if measure == "displacement" else measure
        data.AddArray(_array(_single(values), name))
        data.AddArray(_array(envelope.state[measure], f"{name}_governs"))
    data.AddArray(_array(field_mesh.origin.astype(np.int32), "node"))
    _add_section(grid, job, field_mesh)
    _add_strings(grid.GetFieldData(), "states", names)
    _add_facts(grid, job, field_mesh, cautions)
    _write(path, grid)


def caution_line(caution: Caution) -> str:
    """A caution as one line of text, e.g. "CHECK thick-plate: message Action: ..."."""
    return f"{caution.severity.upper()} {caution.code}: {caution.message} Action: {caution.action}"


def _grid(field_mesh: FieldMesh) -> vtkUnstructuredGrid:
    blocks = field_mesh.mesh.blocks
    points = vtkPoints()
    points.SetData(_array(_in_space(field_mesh.points)))
    sizes = [block.element.node_count for block in blocks]
    counts = [block.element_count for block in blocks]
    offsets = np.concatenate(([0], np.cumsum(np.repeat(sizes, counts)))).astype(np.int32)
    connectivity = np.concatenate([c.ravel() for c in field_mesh.connectivity]).astype(np.int32)
    cells = vtkCellArray()
    cells.SetData(_array(offsets), _array(connectivity))
    types = np.repeat([block.element.vtk_cell_type for block in blocks], counts)
    grid = vtkUnstructuredGrid()
    grid.SetPoints(points)
    grid.SetCells(_array(types.astype(np.uint8)), cells)
    return grid


def _add_point_data(grid: vtkUnstructuredGrid, field_mesh: FieldMesh, fields: Fields) -> None:
    data = grid.GetPointData()
    data.AddArray(_array(_in_space(fields.displacement), "displacement"))
    data.AddArray(_array(_single(fields.stress), "stress", STRESS_COMPONENTS))
    scalars: Mapping[str, NDArray] = {
        "von_mises": fields.von_mises,
        "principal_max": fields.principal_max,
        "principal_min": fields.principal_min,
        "shear_max": fields.shear_max,
        "thickness_strain": fields.thickness_strain,
    }
    for name, values in scalars.items():
        data.AddArray(_array(_single(values), name))
    data.AddArray(_array(field_mesh.origin.astype(np.int32), "node"))


def _add_facts(
    grid: vtkUnstructuredGrid, job: Job, field_mesh: FieldMesh, cautions: Sequence[Caution]
) -> None:
    """What a file needs to be understood on its own."""
    data = grid.GetFieldData()
    _add_strings(data, "title", [job.title])
    _add_strings(data, "cautions", map(caution_line, cautions))
    _add_strings(data, "units", _unit_lines(job.units))
    _add_strings(data, "region_names", field_mesh.mesh.regions)


def _add_section(grid: vtkUnstructuredGrid, job: Job, field_mesh: FieldMesh) -> None:
    mesh = field_mesh.mesh
    region = np.concatenate([block.region for block in mesh.blocks]).astype(np.int32)
    thickness = np.array([job.thickness_of(name) for name in mesh.regions])
    data = grid.GetCellData()
    data.AddArray(_array(region, "region"))
    data.AddArray(_array(_single(thickness[region]), "thickness"))


def _unit_lines(units: Units) -> list[str]:
    return [
        f"length: {units.length}",
        f"force: {units.force}",
        f"displacement: {units.length}",
        f"stress: {units.stress}",
        f"thickness: {units.length}",
        "thickness_strain: 1",
    ]


def _in_space(plane: NDArray) -> NDArray[np.float64]:
    """(n, 2) in the plane to (n, 3) with z = 0: VTK's vectors have three components."""
    space = np.zeros((len(plane), 3))
    space[:, :2] = plane
    return space


def _single(values: NDArray) -> NDArray[Any]:
    """In single precision, unless the largest value is beyond what that can tell."""
    largest = np.abs(values).max(initial=0.0)
    tells = largest == 0 or LEAST_SINGLE <= largest <= MOST_SINGLE
    return np.ascontiguousarray(values, dtype=np.float32 if tells else np.float64)


def _array(values: NDArray, name: str = "", components: Iterable[str] = ()) -> vtkDataArray:
    """A VTK array with a copy of the values, so that it may outlive them."""
    array = numpy_to_vtk(np.ascontiguousarray(values), deep=True)
    array.SetName(name)
    for number, component in enumerate(components):
        array.SetComponentName(number, component)
    return array


def _add_strings(data: vtkFieldData, name: str, lines: Iterable[str]) -> None:
    array = vtkStringArray()
    array.SetName(name)
    for line in lines:
        array.InsertNextValue(line)
    data.AddArray(array)


def _write(path: Path, grid: vtkUnstructuredGrid) -> None:
    writer = vtkXMLUnstructuredGridWriter()
    writer.SetFileName(str(path))
    writer.SetInputData(grid)
    writer.SetDataModeToAppended()
    writer.EncodeAppendedDataOff()
    writer.SetCompressorTypeToLZ4()
    if not writer.Write():
        # VTK counts its own errors from 20000; below they are those of the system.
        code = writer.GetErrorCode()
        if code == vtkErrorCode.OutOfDiskSpaceError:
            code = errno.ENOSPC
        code = code if 0 < code < vtkErrorCode.FirstVTKErrorCode else errno.EIO
        why = f"the VTK file could not be written: {os.strerror(code)}"
        raise OSError(code, why, str(path))
