"""How large a job is, as far as its document tells, against what the operator allows.

Counted before anything is meshed: a few divisions in a document can ask for more than the machine
has. What a free mesh comes to is known only to a worker, which asks `check_dofs` again.
"""

from collections.abc import Iterator

from elements.registry import get
from workers.errors import Fault, LimitError
from workers.geometry import MeshGeometry, Patch, PatchGeometry
from workers.job import Job
from workers.settings import Settings, variable


def check_size(job: Job, settings: Settings) -> None:
    """Look whether a job is within the limits.

    Raises
    ------
    LimitError   everything that is too large, and how much is allowed.
    """
    if faults := tuple(_faults(job, settings)):
        raise LimitError(faults)


def check_dofs(dofs: int, most: int | None) -> None:
    """Look whether a mesh is within the limit; raises LimitError."""
    if most is not None and dofs > most:
        raise LimitError([_fault("/meshing", dofs, "degrees of freedom", "most_dofs", most)])


def count_states(job: Job) -> int:
    """Load cases and combinations in the results."""
    return len(job.cases or job.load_cases) + len(job.combinations)


def count_nodes(job: Job) -> int | None:
    """Nodes of the client's own mesh, or those of all patches before they are merged.

    None for an outline, whose mesh is still to be made.
    """
    if isinstance(job.geometry, MeshGeometry):
        return len(job.geometry.nodes)
    if isinstance(job.geometry, PatchGeometry):
        return sum(_patch_nodes(patch, job.meshing.element) for patch in job.geometry.patches)
    return None


def _patch_nodes(patch: Patch, element: str) -> int:
    kind, (m, n) = get(element), patch.divisions
    nodes = (kind.order * m + 1) * (kind.order * n + 1)
    # A quadrilateral of second order with eight nodes has none in its middle.
    has_middle = kind.is_triangle or kind.node_count > 8
    return nodes if kind.order == 1 or has_middle else nodes - m * n


def _faults(job: Job, settings: Settings) -> Iterator[Fault]:
    if (states := count_states(job)) > settings.most_cases:
        place = "/cases" if job.cases else "/load_cases"
        yield _fault(
            place, states, "load cases and combinations", "most_cases", settings.most_cases
        )
    nodes = count_nodes(job)
    if nodes is None:
        return
    place = "/geometry/mesh" if isinstance(job.geometry, MeshGeometry) else "/geometry/patches"
    if nodes > settings.most_nodes:
        yield _fault(place, nodes, "nodes", "most_nodes", settings.most_nodes)
    elif 2 * nodes > settings.most_dofs:
        yield _fault(place, 2 * nodes, "degrees of freedom", "most_dofs", settings.most_dofs)


def _fault(place: str, seen: int, what: str, setting: str, most: int) -> Fault:
    return Fault(
        place,
        f"{seen} {what} are more than the {most} that this server takes; make it smaller, or have "
        f"{variable(setting)} raised",
    )
