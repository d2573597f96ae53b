"""From displacements to stresses: the elements' own, and recovered at the field points.

All states at once, in chunks of elements; a state is a column. Von Mises and the like are formed
by whoever wants them, after superposition. How samples become nodal values is in
`patch_recovery.py`.
"""

from collections.abc import Callable, Hashable
from dataclasses import dataclass, field
from functools import partial

import numpy as np
from numpy.typing import NDArray
from scipy.sparse import csr_array

from workers.analysis.field_mesh import FieldMesh
from workers.analysis.model import Model
from workers.analysis.patch_recovery import border_corners, recovery_operator
from workers.analysis.plane_stress import thermal_strain
from workers.analysis.probes import interpolation, locate

Array = NDArray[np.float64]
Temperature = tuple[Array, ...] | None  # for each block (m, k) [K]

ELEMENTS_AT_ONCE = 256  # operators and gathered displacements of a chunk stay in the cache


class OperatorStore:
    """Keeps what is made once for a chunk of elements and used for many states.

    room : bytes; as much of it as fits; the rest is made again each time.
    """

    def __init__(self, room: float) -> None:
        self._room = room
        self._kept: dict[Hashable, tuple[Array, ...]] = {}

    def get(self, key: Hashable, make: Callable[[], tuple[Array, ...]]) -> tuple[Array, ...]:
        """What `make` makes, or made before under that key."""
        if key in self._kept:
            return self._kept[key]
        made = make()
        size = sum(array.nbytes for array in made)
        if size <= self._room:
            self._room -= size
            self._kept[key] = made
        return made


@dataclass(frozen=True, eq=False)
class Recovery:
    """Stress recovery on one mesh; the operator serves every state.

    model : Model
    field_mesh : FieldMesh        its P points carry the recovered stress
    operator : (P, Q) matrix      from the Q samples, see `patch_recovery.recovery_operator`
    operators : OperatorStore     nothing is kept unless a caller with many states gives room
    """

    model: Model
    field_mesh: FieldMesh
    operator: csr_array
    operators: OperatorStore = field(default_factory=lambda: OperatorStore(0))

    @classmethod
    def build(cls, model: Model, room: float = 0) -> "Recovery":
        """room : for operators that serve one state after another [bytes]"""
        field_mesh = FieldMesh.build(model.mesh)
        return cls(model, field_mesh, recovery_operator(field_mesh), OperatorStore(room))

    def sample_stress(self, displacement: Array, temperature: Temperature = None) -> Array:
        """The elements' stress at the samples of the operator, (Q, 3, k) [F/L^2].

        displacement : (N, 2, k) [L]; temperature : for each block (m, k) [K].
        """
        states = displacement.shape[2]
        samples, anchors = [], []
        for number, block in enumerate(self.model.mesh.blocks):
            own = block.element.recovery_points()
            stress = raw_stress(
                self.model, number, own, displacement, temperature, store=self.operators
            )
            samples.append(stress.reshape(-1, 3, states))
            for corner, elements in enumerate(border_corners(self.field_mesh, number)):
                at = block.element.natural_nodes[[corner]]
                stress = raw_stress(
                    self.model, number, at, displacement, temperature, elements=elements
                )
                anchors.append(stress[:, 0])
        return np.concatenate(samples + anchors)

    def nodal_stress(self, displacement: Array, temperature: Temperature = None) -> Array:
        """Recovered stress at the field points, (P, 3, k) [F/L^2]."""
        samples = self.sample_stress(displacement, temperature)
        flat = self.operator @ samples.reshape(len(samples), -1)
        return flat.reshape(-1, 3, displacement.shape[2])

    def interpolate(self, points: Array) -> csr_array:
        """Operator from values at the field points to values at places in the plate (p, 2).

        Raises
        ------
        MeshError   a place is outside the plate.
        """
        return interpolation(
            self.field_mesh, locate(self.field_mesh.mesh, points, [""] * len(points))
        )


def raw_stress(
    model: Model,
    block: int,
    points: Array,
    displacement: Array,
    temperature: Temperature = None,
    *,
    elements: NDArray[np.intp] | None = None,
    store: OperatorStore | None = None,
) -> Array:
    """The elements' own stress at natural points, discontinuous from element to element.

    Parameters
    ----------
    block : index into model.mesh.blocks
    points : (q, 2) natural coordinates
    displacement : (N, 2, k) [L]
    temperature : for each block (m, k) temperature change [K], or None
    elements : (e,) numbers in the block; all of it if None
    store : keeps the operators of a whole block for further states

    Returns
    -------
    (e, q, 3, k) array   D (B u - alpha dT) [F/L^2]
    """
    mesh_block = model.mesh.blocks[block]
    if elements is None:
        elements = np.arange(mesh_block.element_count)
    else:
        store = None
    states = displacement.shape[2]
    stress = np.empty((len(elements), len(points), 3, states))
    for start in range(0, len(elements), ELEMENTS_AT_ONCE):
        chunk = elements[start : start + ELEMENTS_AT_ONCE]
        nodes = mesh_block.connectivity[chunk]
        form = partial(_stress_operator, model, block, chunk, points)
        (operator,) = form() if store is None else store.get((block, start, points.tobytes()), form)
        here = displacement[nodes].reshape(len(chunk), -1, states)
        np.matmul(
            operator.reshape(len(chunk), -1, here.shape[1]),
            here,
            out=stress[start : start + len(chunk)].reshape(len(chunk), -1, states),
        )
    if temperature is not None:
        change = temperature[block][elements]
        stress -= thermal_stress(model, block, change, elements)[:, None]
    return stress


def _stress_operator(
    model: Model, block: int, elements: NDArray[np.intp], points: Array
) -> tuple[Array]:
    coords = model.mesh.nodes[model.mesh.blocks[block].connectivity[elements]]
    D = model.sections[block].constitutive[elements]
    return (model.mesh.blocks[block].element.stress_operator(coords, D, points),)


def region_value(model: Model, name: str) -> Array:
    """A value of `Sections` by region, (regions,); nan for a region without elements."""
    value = np.full(len(model.mesh.regions), np.nan)
    for block, section in zip(model.mesh.blocks, model.sections, strict=True):
        value[block.region] = getattr(section, name)
    return value


def thermal_stress(
    model: Model, block: int, change: Array, elements: NDArray[np.intp] | slice = slice(None)
) -> Array:
    """D alpha dT: what a temperature change takes off the stress, (e, 3, k) [F/L^2].

    change : (e, k) of the elements [K]. Zero where there is no change, whatever alpha is.
    """
    section = model.sections[block]
    expansion = section.thermal_expansion[elements][:, None]
    free = thermal_strain(np.where(change == 0, 0.0, expansion), change)
    return np.einsum("eij,ekj->eik", section.constitutive[elements], free)
