"""The shape of a plate in words, corner by corner, to be held against a drawing."""

from collections.abc import Iterator, Sequence
from itertools import islice

from workers.geometry import CircleShape, Hole, OutlineGeometry, PatchGeometry, Region, Vertex
from workers.job import Job
from workers.outputs.wording import show, vector

MOST_CORNERS, MOST_ROWS = 40, 40  # of a loop, of a plate; the job document has all
DASH = "\N{EN DASH}"

Row = tuple[str, str]


def shape_rows(job: Job) -> list[Row]:
    """Name and words of the outline and of each hole, region, patch and named point.

    Nothing for a mesh of the client's own; a last row says how many were left out.
    """
    rows = iter(_rows(job))
    shown = list(islice(rows, MOST_ROWS))
    left = sum(1 for _ in rows)
    return [*shown, ("", f"and {left} more, in the job document")] if left else shown


def _rows(job: Job) -> Iterator[Row]:
    geometry = job.geometry
    if isinstance(geometry, OutlineGeometry):
        yield "outline", _loop(geometry.outline)
        parts: list[Hole | Region] = [*geometry.holes, *geometry.regions]
        for part in parts:
            if part.shape is not None:
                yield part.name, _shape(part.shape)
    if isinstance(geometry, PatchGeometry):
        for patch in geometry.patches:
            m, n = patch.divisions
            corners = ", ".join(vector(corner) for corner in patch.corners)
            yield patch.name, f"corners {corners}; {m} by {n} elements"
    if isinstance(geometry, OutlineGeometry | PatchGeometry):
        for name, at in geometry.points.items():
            yield name, f"point {vector(at)}"


def _shape(shape: CircleShape | Sequence[Vertex]) -> str:
    if isinstance(shape, CircleShape):
        return f"circle ⌀ {show(2 * shape.radius)} about {vector(shape.centre)}"
    return _loop(shape)


def _loop(vertices: Sequence[Vertex]) -> str:
    """Corners in their order, e.g. "(0, 0) –sole→ (420, 0) R 15 → (480, 60) → back"."""
    words = "".join(_corner(vertex) for vertex in vertices[:MOST_CORNERS])
    left = len(vertices) - MOST_CORNERS
    return words + (f"and {left} more corners" if left > 0 else "back")


def _corner(vertex: Vertex) -> str:
    rounded = f" R {show(vertex.fillet)}" if vertex.fillet is not None else ""
    named = f"\N{FIRST STRONG ISOLATE}{vertex.side}\N{POP DIRECTIONAL ISOLATE}"
    side = [named] if vertex.side is not None else []
    if vertex.through is not None:
        side.append(f"arc through {vector(vertex.through)}")
    return f"{vector(vertex.at)}{rounded} {DASH if side else ''}{', '.join(side)}→ "
