"""What a free mesh is going to be: its sizes in the mesher's coordinates, and about how many.

Absurd sizes are refused here, where a job is accepted, before anything is meshed. NumPy and shapely
only.
"""

from collections.abc import Iterator
from typing import NamedTuple

import numpy as np

from elements.contract import ElementType
from workers.analysis.meshing.drawing import Drawing
from workers.analysis.meshing.frame import Frame
from workers.analysis.meshing.gaps import gap_points
from workers.analysis.meshing.sizing import DEFAULTS, Sizes, choose_sizes, estimate_triangles
from workers.errors import Fault
from workers.job import Meshing

MOST_NODES = 1_000_000
# Nodes for each element of a large mesh, by corners and order: Euler's formula.
NODES = {(3, 1): 0.5, (3, 2): 2.0, (4, 1): 1.0, (4, 2): 3.0}
SMALLEST = 1e-5  # of the diagonal: no size may be smaller


class Plan(NamedTuple):
    """A drawing in the mesher's coordinates and the sizes of its mesh.

    elements, nodes : about how many there will be
    """

    frame: Frame
    local: Drawing
    sizes: Sizes
    elements: float
    nodes: float


def plan_mesh(drawing: Drawing, element: ElementType, meshing: Meshing) -> Plan:
    """Sizes as the job asks for them, narrow gaps included."""
    plan = _without_gaps(drawing, element, meshing)
    general = plan.sizes.general
    gaps = gap_points(plan.local, general, DEFAULTS[element.order].per_gap)
    sizes = plan.sizes._replace(points=np.concatenate((gaps, plan.sizes.points)))
    return Plan(plan.frame, plan.local, sizes, *_counts(plan.local, sizes, element))


def plan_faults(drawing: Drawing, element: ElementType, meshing: Meshing) -> list[Fault]:
    """Sizes that no mesh can have, or that make too many nodes."""
    diagonal = Frame.around(drawing).scale
    if faults := list(_size_faults(meshing, diagonal)):
        return faults
    return count_faults(_without_gaps(drawing, element, meshing), meshing)


def count_roughly(drawing: Drawing, element: ElementType, meshing: Meshing) -> float:
    """About how many elements there will be, narrow gaps left out."""
    return _without_gaps(drawing, element, meshing).elements


def count_faults(plan: Plan, meshing: Meshing) -> list[Fault]:
    """The fault of too many nodes, which names what makes them; [] if they are few enough."""
    if plan.nodes <= MOST_NODES:
        return []
    pointer, size = "/meshing/size", meshing.size
    if meshing.sizes and (size is None or min(meshing.sizes.values()) < size / 2):
        name = min(meshing.sizes, key=lambda name: meshing.sizes[name])
        pointer, size = _pointer(name), meshing.sizes[name]
    seen = "the plate's details" if size is None else f"size {size:.6g}"
    more = f"; at least about {_enough(plan, size):.3g} is needed" if size is not None else ""
    return [
        Fault(
            pointer,
            f"{seen} would make about {plan.elements:.2g} elements with {plan.nodes:.2g} nodes; at "
            f"most {MOST_NODES} nodes are allowed{more}",
        )
    ]


def _enough(plan: Plan, size: float) -> float:
    # Between 1/h (along a side) and 1/h^2 (over an area); the latter asks for no more than needed.
    return size * float(np.sqrt(plan.nodes / MOST_NODES))


def _without_gaps(drawing: Drawing, element: ElementType, meshing: Meshing) -> Plan:
    frame = Frame.around(drawing)
    local = frame.inward(drawing)
    size = None if meshing.size is None else frame.length(meshing.size)
    sizes = {name: frame.length(size) for name, size in meshing.sizes.items()}
    chosen = choose_sizes(local, element.order, size, sizes)
    return Plan(frame, local, chosen, *_counts(local, chosen, element))


def _counts(local: Drawing, sizes: Sizes, element: ElementType) -> tuple[float, float]:
    # Two triangles make a quadrilateral.
    count = estimate_triangles(local, sizes) / (1.0 if element.is_triangle else 2.0)
    return count, count * NODES[element.corners, element.order]


def _size_faults(meshing: Meshing, diagonal: float) -> Iterator[Fault]:
    least, general = SMALLEST * diagonal, meshing.size
    given = [("/meshing/size", general)] if general is not None else []
    given += [(_pointer(name), size) for name, size in meshing.sizes.items()]
    for pointer, size in given:
        if size < least:
            yield Fault(
                pointer,
                f"size {size:.3g} is too small for a plate that measures {diagonal:.4g} across; "
                f"at least {least:.3g} is possible",
            )
        elif general is not None and size > general:
            yield Fault(
                pointer,
                f"size {size:.6g} is larger than the general size {general:.6g}, which no element "
                "exceeds; make it smaller, or leave it out",
            )


def _pointer(name: str) -> str:
    return "/meshing/sizes/" + name.replace("~", "~0").replace("/", "~1")
