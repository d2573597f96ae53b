"""`fishplate check`: what a job document was understood to say, before anything is solved."""

from pathlib import Path

import click
import numpy as np
from rich.console import Console
from rich.markup import escape

from api.commands.layout import number, place, print_cautions, print_table, settled
from api.commands.terminal import BAD_INPUT, leave, out
from workers.analysis.loads.cases import resolve_loads
from workers.analysis.mesh import Mesh
from workers.analysis.meshing.build import mesh_job
from workers.analysis.model import build_model
from workers.analysis.resultants import centroid, resultant
from workers.analysis.selection import select
from workers.cautions import STANDING
from workers.document.read import read_document
from workers.errors import FaultyError
from workers.job import Job, Named, Support, Target
from workers.preflight import preflight

Row = tuple[str, ...]


@click.command()
@click.argument("job", type=click.Path(exists=True, dir_okay=False, path_type=Path))
def command(job: Path) -> None:
    """Read the job document JOB and say what was understood.

    Meshes the plate, finds every support and load on it, and adds up what each load case applies.
    Solves nothing.
    """
    try:
        understood = read_document(job.read_bytes())
        mesh = preflight(understood) or mesh_job(understood)
        resultants = _resultants(understood, mesh)
        supports = _supports(understood, mesh)
    except FaultyError as error:
        faults = [fault.as_json() for fault in error.faults]
        leave(BAD_INPUT, "The job document is wrong.", faults)
    console = out()
    print_cautions(console, [caution.as_json() for caution in STANDING])
    _print_plate(console, understood, mesh)
    print_table(console, "Supports", ("name", "on", "holds", "nodes"), supports, words=3)
    force, length = understood.units.force, understood.units.length
    print_table(
        console,
        f"Applied by the loads, moments about the centroid {place(centroid(mesh))}",
        ("case", "loads", f"x [{force}]", f"y [{force}]", f"moment [{force} {length}]"),
        resultants,
        words=1,
    )


def _print_plate(console: Console, job: Job, mesh: Mesh) -> None:
    low, high = mesh.nodes.min(axis=0), mesh.nodes.max(axis=0)
    length = job.units.length
    counts: dict[str, int] = {}
    for block in mesh.blocks:
        counts[block.element.name] = counts.get(block.element.name, 0) + block.element_count
    parts = mesh.component_count
    console.print(f"\n[bold]{escape(job.title)}[/bold]  in {length} and {job.units.force}")
    console.print(f"from {place(low)} to {place(high)} {length}: "
                  f"{' x '.join(number(side) for side in high - low)} {length}")  # fmt: skip
    console.print(f"{mesh.node_count} nodes, "
                  + ", ".join(f"{count} {name}" for name, count in sorted(counts.items()))
                  + f", {parts} part{'s' if parts != 1 else ''}")  # fmt: skip
    for region in mesh.regions:
        material = job.material_of(region)
        console.print(
            f"{escape(region)}: {number(job.thickness_of(region))} {length} of "
            f"{escape(material.name)}, E = {number(material.youngs_modulus)} {job.units.stress}, "
            f"nu = {number(material.poissons_ratio)}"
        )


def _supports(job: Job, mesh: Mesh) -> list[Row]:
    return [
        (support.label, _where(support.on), _holds(support),
         str(len(select(mesh, support.on, support.pointer).nodes)))
        for support in job.supports
    ]  # fmt: skip


def _holds(support: Support) -> str:
    """What a support prescribes, in the words of the document."""
    held = [f"{name} = {number(value)}" for name in ("ux", "uy", "normal")
            if (value := getattr(support, name)) is not None]  # fmt: skip
    if support.along is not None:
        held.append(f"along {place(support.along)} = {number(support.displacement or 0.0)}")
    if support.spring is not None:
        springs = ((name, getattr(support.spring, name))
                   for name in ("x", "y", "normal", "tangential"))  # fmt: skip
        held += [f"spring {name} {number(value)}" for name, value in springs if value]
    return ", ".join(held) + (f" (in {support.case})" if support.case else "")


def _resultants(job: Job, mesh: Mesh) -> list[Row]:
    """What the loads of each case add up to, about the centroid of the plate."""
    applied = resolve_loads(build_model(job, mesh)).applied
    sums = resultant(mesh.nodes, applied, centroid(mesh))
    scale = np.abs(applied).sum(axis=(0, 1)) * np.array([[1], [1], [mesh.diagonal]])
    return [
        (case.name, str(len(case.loads)), *map(number, map(settled, values, scales)))
        for case, values, scales in zip(job.load_cases, sums.T, scale.T, strict=True)
    ]


def _where(target: Target) -> str:
    return target.name if isinstance(target, Named) else type(target).__name__.lower()
