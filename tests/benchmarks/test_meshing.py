"""Free meshing against the mesh library alone, and a mesh kept on disk.

The library alone makes as many elements of the same kind from the same description, mid-side nodes
included. Processor time is compared, of this process and its children: it does not depend on what
else the machine does. 100 000 elements, three times over, with BENCHMARKS=long.
"""

import resource
import statistics
from collections.abc import Callable
from pathlib import Path
from typing import TypeVar

import pytest
from netgen.meshing import MeshingParameters

from elements.registry import get
from tests.gallery import GALLERY, drawn
from tests.good_documents import good
from tests.measuring import LONG, at_most
from workers.analysis.meshing.drawing import Drawing
from workers.analysis.meshing.free import mesh_drawing
from workers.analysis.meshing.mesher import library_geometry
from workers.analysis.meshing.outline import draw
from workers.analysis.meshing.plan import plan_mesh
from workers.document.read import load
from workers.job import Meshing
from workers.mesh_cache import MeshCache

pytestmark = pytest.mark.benchmark

COUNT = 100_000 if LONG else 25_000
ROUNDS = 3 if LONG else 1
GOAL = 0.6  # times the library alone
AGAIN_GOAL = 0.05  # times meshing anew
ALIKE = 0.1  # the library's number of elements may differ by
AREA = 0.6  # of an element over the square of its size, roughly

T = TypeVar("T")


def seconds(work: Callable[[], T]) -> tuple[T, float]:
    """What the work returns, and processor time of this process and its children."""
    start = _used()
    made = work()
    return made, _used() - start


def _used() -> float:
    usages = (resource.getrusage(who) for who in (resource.RUSAGE_SELF, resource.RUSAGE_CHILDREN))
    return sum(usage.ru_utime + usage.ru_stime for usage in usages)


def library_alone(drawing: Drawing, meshing: Meshing, factor: float) -> int:
    """The library's own mesh; factor : on all sizes. Returns the number of elements."""
    element = get(meshing.element)
    plan = plan_mesh(drawing, element, meshing)
    sizes = plan.sizes.scaled(factor)
    parameters = MeshingParameters(maxh=sizes.general, grading=plan.sizes.grading)
    geometry = library_geometry(plan.local, sizes)
    made = geometry.GenerateMesh(mp=parameters, quad_dominated=not element.is_triangle)
    if element.order > 1:
        made.SecondOrder()
    return len(made.Elements2D())


@pytest.mark.parametrize("element", ["T3", "T6", "Q4", "Q8"])
def test_free_meshing_against_the_library_alone(element: str) -> None:
    drawing = draw(drawn(GALLERY["lifting lug"]))
    guess = Meshing(element=element, size=(drawing.area / COUNT / AREA) ** 0.5)
    count = mesh_drawing(drawing, guess).element_count  # warms up, too
    meshing = Meshing(element=element, size=guess.size * (count / COUNT) ** 0.5)
    # The library's elements are of another size for the same wish.
    factor = (library_alone(drawing, meshing, 1.0) / COUNT) ** 0.5
    ratios = []
    for _ in range(ROUNDS):
        mesh, ours = seconds(lambda: mesh_drawing(drawing, meshing))
        alone, theirs = seconds(lambda: library_alone(drawing, meshing, factor))
        counts = [mesh.element_count, alone]
        ratios.append(ours / theirs)
        print(f"\n{element}: {counts[0]} elements in {ours:.2f} s, ", end="")
        print(f"{counts[1]} of the library in {theirs:.2f} s", end="")
        assert counts == pytest.approx([COUNT, COUNT], rel=ALIKE)
    at_most(f"free meshing / the library alone, {element}", statistics.median(ratios), GOAL)


def test_second_job_on_the_same_plate_meshes_in_no_time(tmp_path: Path) -> None:
    document = good("outline")
    document["meshing"] = {"element": "Q8", "size": 0.5}
    job, cache = load(document), MeshCache(tmp_path)
    _, first = seconds(lambda: cache.mesh_job(job))
    again = statistics.median(seconds(lambda: cache.mesh_job(job))[1] for _ in range(3))
    print(f"\nmeshed in {first:.2f} s, read back in {again:.3f} s")
    at_most("a mesh again / anew", again / first, AGAIN_GOAL)
