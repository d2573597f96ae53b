"""All load cases of a job as nodal forces and temperature changes."""

from collections.abc import Hashable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import coo_array, csr_array

from workers.analysis.loads.area import Area
from workers.analysis.loads.kinds import NodalLoad, Places, nodal_load
from workers.analysis.loads.nodal_forces import NodalForces
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
    """forces : of the mechanical loads; heating : what temperature does."""

    forces: NodalForces
    heating: Heating

    @property
    def applied(self) -> Array:
        """Nodal forces of the mechanical loads, written out, (N, 2, c) [F]."""
        return self.forces.of_cases(slice(0, self.forces.case_count))


def resolve_loads(model: Model) -> Loads:
    """Put the load cases of a job on its mesh.

    Raises
    ------
    MeshError   carries the faults of all loads.
    """
    cases = model.job.load_cases
    places = Places(model)
    direct: list[tuple[NodalLoad, int]] = []
    volumes: dict[Hashable, VolumeTotals] = {}
    heated: dict[Hashable, tuple[Area, Array]] = {}
    faults: list[Fault] = []
    for number, load in ((n, load) for n, case in enumerate(cases) for load in case.loads):
        try:
            if isinstance(load, VOLUME_LOADS):
                found = volume_load(load, places)
                totals = VolumeTotals.none(places.area(load), len(cases))
                volumes.setdefault(load.on, totals).add(found, number)
            elif isinstance(load, TemperatureChange):
                field = (_heated_area(load, places), np.zeros(len(cases)))
                heated.setdefault(load.on, field)[1][number] += load.change
            else:
                direct.append((nodal_load(load, places), number))
        except FaultyError as error:
            faults.extend(error.faults)
    if faults:
        raise MeshError(faults)
    change = np.array([change for _, change in heated.values()]).reshape(-1, len(cases))
    return Loads(
        NodalForces(_gather(direct, model.mesh.node_count, len(cases)), tuple(volumes.values())),
        Heating(tuple(area for area, _ in heated.values()), change),
    )


def _gather(direct: list[tuple[NodalLoad, int]], node_count: int, cases: int) -> csr_array:
    """Loads at points and on sides as one sparse matrix, (2N, c)."""
    none = NodalLoad(np.empty(0, np.int64), np.empty((0, 2)))
    loads, numbers = zip((none, 0), *direct, strict=True)
    dofs = [2 * load.nodes[:, None] + np.arange(2) for load in loads]
    force = np.concatenate([load.force.ravel() for load in loads])
    case = np.repeat(numbers, [2 * len(load.nodes) for load in loads])
    row = np.concatenate([d.ravel() for d in dofs])
    return coo_array((force, (row, case)), shape=(2 * node_count, cases)).tocsr()


def _heated_area(load: TemperatureChange, places: Places) -> Area:
    area = places.area(load)
    area.require("thermal_expansion", "thermal expansion", load.pointer)
    return area
