"""What the job asks to see at points, along lines, at weld toes, gathered as states stream by."""

from typing import Any

import numpy as np
from numpy.typing import NDArray

from workers.analysis.combine import States
from workers.analysis.field_mesh import FieldMesh
from workers.analysis.hot_spots import (
    extrapolate,
    reference_points,
    stress_along,
    thickness_at,
    unit_direction,
)
from workers.analysis.plane_stress import principal, von_mises
from workers.analysis.probes import interpolation, locate
from workers.job import Job, Line

Array = NDArray[np.float64]


class Samples:
    """Recovered stress and displacement at the probes, lines and hot spots of a job.

    Stress components are interpolated between the field points; von Mises and principal stresses
    follow from them. On the border of two regions a point takes the stress of the element that
    comes first in the mesh.

    Raises
    ------
    MeshError   points outside the plate, with the pointer of each request.
    """

    def __init__(self, field_mesh: FieldMesh, job: Job, states: States) -> None:
        requests = job.requests
        self._states = states
        self._lines = requests.lines
        self._probes = tuple(requests.probes)
        self._spots = requests.hot_spots
        self._thickness = job.plate.thickness
        points = [np.array([at], float) for at in requests.probes.values()]
        pointers = [f"/requests/probes/{escape(name)}" for name in requests.probes]
        for name, line in requests.lines.items():
            points.append(_line_points(line))
            pointers += [line.pointer or f"/requests/lines/{escape(name)}"] * line.points
        for name, spot in requests.hot_spots.items():
            points.append(reference_points(spot, self._thickness))
            pointers += [spot.pointer or f"/requests/hot_spots/{escape(name)}"] * 2
        asked = np.concatenate(points) if points else np.empty((0, 2))
        located = locate(field_mesh.mesh, asked, pointers)
        self._position = located.position
        self._weights = interpolation(field_mesh, located)
        self._stress = np.empty((len(asked), 3, len(states)))
        self._displacement = np.empty((len(asked), 2, len(states)))

    def include(self, columns: range, displacement: Array, stress: Array) -> None:
        """Take in some states: (P, 2, k) and (P, 3, k) at the field points."""
        for store, values in ((self._displacement, displacement), (self._stress, stress)):
            flat = self._weights @ values.reshape(len(values), -1)
            store[:, :, columns.start : columns.stop] = flat.reshape(-1, *values.shape[1:])

    def probes(self) -> dict[str, Any]:
        """By probe, then by state."""
        return {
            name: {
                state: self._probe(row, column) for column, state in enumerate(self._states.names)
            }
            for row, name in enumerate(self._probes)
        }

    def lines(self) -> dict[str, Any]:
        """By line: points, distance from the first, and by state what is there."""
        found, start = {}, len(self._probes)
        for name, line in self._lines.items():
            rows = slice(start, start + line.points)
            start += line.points
            points = self._position[rows]
            found[name] = {
                "points": points.tolist(),
                "distance": np.linalg.norm(points - points[0], axis=1).tolist(),
                "cases": {
                    state: self._on_line(rows, column)
                    for column, state in enumerate(self._states.names)
                },
            }
        return found

    def hot_spots(self) -> dict[str, Any]:
        """By hot spot: where the stress is read, and by state what it extrapolates to."""
        found, start = {}, len(self._stress) - 2 * len(self._spots)
        for name, spot in self._spots.items():
            rows = slice(start, start + 2)
            start += 2
            direction = unit_direction(spot)
            found[name] = {
                "at": list(spot.at),
                "direction": direction.tolist(),
                "thickness": thickness_at(spot, self._thickness),
                "points": self._position[rows].tolist(),
                "cases": {
                    state: self._hot_spot(rows, column, direction)
                    for column, state in enumerate(self._states.names)
                },
            }
        return found

    def _hot_spot(self, rows: slice, column: int, direction: Array) -> dict[str, Any]:
        stress = self._stress[rows, :, column]
        along = stress_along(stress, direction)
        return {
            "stress": float(extrapolate(along)),
            "along": along.tolist(),
            "principal": np.stack(principal(stress), axis=1).tolist(),
        }

    def _probe(self, row: int, column: int) -> dict[str, Any]:
        stress = self._stress[row, :, column]
        return {
            "at": self._position[row].tolist(),
            "stress": stress.tolist(),
            "von_mises": float(von_mises(stress)),
            "principal": [float(value) for value in principal(stress)],
            "displacement": self._displacement[row, :, column].tolist(),
        }

    def _on_line(self, rows: slice, column: int) -> dict[str, Any]:
        stress = self._stress[rows, :, column]
        return {
            "stress": stress.tolist(),
            "von_mises": von_mises(stress).tolist(),
            "displacement": self._displacement[rows, :, column].tolist(),
        }


def _line_points(line: Line) -> Array:
    fraction = np.linspace(0.0, 1.0, line.points)[:, None]
    return (1 - fraction) * np.array(line.start, float) + fraction * np.array(line.end, float)


def escape(name: str) -> str:
    """A name as one step of a JSON pointer (RFC 6901)."""
    return name.replace("~", "~0").replace("/", "~1")
