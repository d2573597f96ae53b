"""All load cases of a job as nodal forces and temperature changes."""

from collections.abc import Hashable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from workers.analysis.loads.area import Area
from workers.analysis.loads.kinds import Places, nodal_load
from workers.analysis.loads.volume import VOLUME_LOADS, VolumeTotals, volume_load
from workers.analysis.model import Model
from workers.errors import Fault, FaultyError, MeshError
from workers.job import TemperatureChange

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class Heating:
    """Temperature changes: each of a few areas, by so much in each case.

    areas : the heated areas
    change : (a, c) array   [K]
    """

    areas: tuple[Area, ...]
    change: Array

    def add_forces(self, forces: Array, cases: slice, position: NDArray) -> None:
        """Add the nodal forces of free expansion to (N, 2, k) forces of some cases [F].

        position (N,) : row of each node in the forces.
        """
        for area, change in zip(self.areas, self.change[:, cases], strict=True):
            if change.any():
                forces[position[area.nodes]] += area.heating[..., None] * change

    def by_element(self, model: Model) -> tuple[Array, ...] | None:
        """Temperature change of every element, (m, c) for each block; None if there is none."""
        if not self.areas:
            return None
        cases = self.change.shape[1]
        fields = tuple(np.zeros((b.element_count, cases)) for b in model.mesh.blocks)
        for area, change in zip(self.areas, self.change, strict=True):
            for field, chosen in zip(fields, area.elements, strict=True):
                field[chosen] += change
        return fields


@dataclass(frozen=True, eq=False)
class Loads:
    """applied : (N, 2, c) nodal forces of the mechanical loads [F]; heating : the rest."""

    applied: Array
    heating: Heating


def resolve_loads(model: Model) -> Loads:
    """Put the load cases of a job on its mesh.

    Raises
    ------
    MeshError   carries the faults of all loads.
    """
    cases = model.job.load_cases
    applied = np.zeros((model.mesh.node_count, 2, len(cases)))
    places = Places(model)
    volumes: dict[Hashable, tuple[Area, VolumeTotals]] = {}
    heated: dict[Hashable, tuple[Area, Array]] = {}
    faults: list[Fault] = []
    for number, load in ((n, load) for n, case in enumerate(cases) for load in case.loads):
        try:
            if isinstance(load, VOLUME_LOADS):
                found = volume_load(load, places)
                place = (places.area(load), VolumeTotals(len(cases)))
                volumes.setdefault(load.on, place)[1].add(found, number)
            elif isinstance(load, TemperatureChange):
                field = (_heated_area(load, places), np.zeros(len(cases)))
                heated.setdefault(load.on, field)[1][number] += load.change
            else:
                at = nodal_load(load, places)
                applied[at.nodes, :, number] += at.force
        except FaultyError as error:
            faults.extend(error.faults)
    if faults:
        raise MeshError(faults)
    for area, totals in volumes.values():
        totals.add_forces(area, applied)
    change = np.array([change for _, change in heated.values()]).reshape(-1, len(cases))
    return Loads(applied, Heating(tuple(area for area, _ in heated.values()), change))


def _heated_area(load: TemperatureChange, places: Places) -> Area:
    area = places.area(load)
    area.require("thermal_expansion", "thermal expansion", load.pointer)
    return area
