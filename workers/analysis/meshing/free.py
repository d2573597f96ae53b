"""Free meshing: a drawing becomes a mesh of one element type.

Choose sizes, let the library mesh coarsely, split every element once, smooth; where that comes out
poor, again and finer there. The library's outcome is never trusted: a mesh is whole and has no
inverted element, or the job fails with the reason.
"""

from collections.abc import Callable
from dataclasses import replace

import numpy as np

from elements import registry
from elements.contract import ElementType
from workers.analysis.mesh import Mesh
from workers.analysis.meshing.audit import flaws
from workers.analysis.meshing.curves import Line
from workers.analysis.meshing.cutting import cut_edges
from workers.analysis.meshing.drawing import Drawing
from workers.analysis.meshing.embedded import embedded_lines
from workers.analysis.meshing.finish import finish, outward
from workers.analysis.meshing.flat_mesh import (
    FlatMesh,
    split_into_quadrilaterals,
    split_into_triangles,
)
from workers.analysis.meshing.judge import Verdict, judge
from workers.analysis.meshing.mesher import MesherFailedError, run_mesher
from workers.analysis.meshing.pairing import pair_triangles, split_poor, split_wide
from workers.analysis.meshing.plan import Plan, count_faults, plan_faults, plan_mesh
from workers.analysis.meshing.sizing import Sizes, around, boundary_pieces
from workers.analysis.meshing.smooth import smooth
from workers.errors import Fault, MeshError
from workers.job import Meshing

Revise = Callable[[Plan], Plan]

PATIENCE = 20.0  # for the library [s], and
PER_ELEMENT = 2e-4  # more for each element that is expected [s]; about ten times what it takes
TRIES = 3  # with triangles
MOST_ROWS = 600.0  # pieces of border of a coarse mesh in which the library may lay quadrilaterals
FINER = 0.6  # of the size that a poor element has: what is asked for there the next time
SMALLER = 0.8  # of all sizes: what is asked for after the library failed


def mesh_drawing(drawing: Drawing, meshing: Meshing, revise: Revise | None = None) -> Mesh:
    """Mesh a checked drawing.

    revise : changes the sizes that the job asks for, for whoever refines the mesh

    Raises
    ------
    MeshError             a size is absurd, or no sound mesh could be made.
    UnknownElementError   the element type is not installed.
    """
    element = registry.get(meshing.element)
    if faults := plan_faults(drawing, element, meshing):
        raise MeshError(faults)
    plan = plan_mesh(drawing, element, meshing)
    if revise is not None:
        plan = revise(plan)
    if faults := count_faults(plan, meshing):
        raise MeshError(faults)
    local, whole, sizes = cut_edges(*_with_points(plan, drawing))
    seconds = PATIENCE + PER_ELEMENT * plan.elements
    flat = _best(local, sizes, element, seconds)
    return finish(outward(flat, local, plan.frame, whole), whole, plan.frame, element)


def _with_points(plan: Plan, drawing: Drawing) -> tuple[Drawing, Drawing, Sizes]:
    """The drawing in both coordinates, and its sizes, with the lines that hold inner points."""
    lines = embedded_lines(plan.local, plan.sizes)
    exact = {plan.local.points[name]: np.array(drawing.points[name]) for name in drawing.inner}
    outside = tuple(
        replace(line, curve=Line(exact[line.start], plan.frame.outward(line.curve.end)))
        for line in lines
    )
    edges = np.concatenate((plan.sizes.edges, [line.curve.length for line in lines]))
    return (
        replace(plan.local, edges=plan.local.edges + lines),
        replace(drawing, edges=drawing.edges + outside),
        plan.sizes._replace(edges=edges),
    )


# --- one mesh, and another if it is poor -----------------------------------------------------


def _best(local: Drawing, sizes: Sizes, element: ElementType, seconds: float) -> FlatMesh:
    """The first mesh without a poor element, or the best of a few.

    Raises
    ------
    MeshError   none of them was sound.
    """
    best: tuple[Verdict, FlatMesh] | None = None
    reasons: list[str] = []
    for rows in _ways(local, sizes, element):
        try:
            mesh = _made(local, sizes, element, seconds, rows=rows)
        except MesherFailedError as error:
            reasons.append(str(error))
            sizes = sizes.scaled(SMALLER)
            continue
        if found := flaws(mesh, local):
            reasons.append("; ".join(found))
            sizes = sizes.scaled(SMALLER)
            continue
        verdict = judge(mesh, local, element)
        if best is None or verdict.worst > best[0].worst:
            best = verdict, mesh
        if not len(verdict.poor):
            break
        if not rows:
            sizes = _finer(sizes, verdict)
    if best is None or not best[0].is_sound:
        raise MeshError([_failure(reasons)])
    return best[1]


def _ways(local: Drawing, sizes: Sizes, element: ElementType) -> list[bool]:
    """Whether the library lays quadrilaterals in rows, one try after the other."""
    rows = not element.is_triangle and boundary_pieces(local, sizes.scaled(2)) <= MOST_ROWS
    return [True] * rows + [False] * TRIES


def _made(
    local: Drawing, sizes: Sizes, element: ElementType, seconds: float, *, rows: bool
) -> FlatMesh:
    coarse = run_mesher(local, sizes.scaled(2), quads=rows, seconds=seconds)
    if element.is_triangle:
        return smooth(split_into_triangles(coarse, local))
    paired = split_wide(coarse) if rows else pair_triangles(coarse)
    return split_poor(smooth(split_into_quadrilaterals(paired, local)))


def _finer(sizes: Sizes, verdict: Verdict) -> Sizes:
    """Smaller elements where the last mesh had poor ones."""
    rings = around(verdict.poor[:, :2], FINER * verdict.poor[:, 2], sizes.general)
    return sizes._replace(points=np.concatenate((sizes.points, rings)))


def _failure(reasons: list[str]) -> Fault:
    seen = reasons[-1] if reasons else "elements on arcs fold over"
    return Fault(
        "/geometry",
        f"the plate could not be meshed: {seen}; try another size, or simplify details that are "
        "much smaller than it",
    )
