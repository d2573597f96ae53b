"""The results of a solution as plain numbers, ready for JSON.

States stream through in chunks, so that memory does not grow with their number. The job's own
particulars, cautions, files and pictures are added by later rooms.
"""

from collections.abc import Callable
from typing import Any

import numpy as np
from numpy.typing import NDArray

from workers.analysis.combine import States, superpose, superpose_blocks
from workers.analysis.cuts import cut_forces
from workers.analysis.effort import TOLERANCE
from workers.analysis.envelope import WORST, Envelope, measures
from workers.analysis.error_estimate import error_stress, estimate_error
from workers.analysis.field_mesh import FieldMesh
from workers.analysis.loads.kinds import Places
from workers.analysis.mesh_digest import mesh_digest
from workers.analysis.model import Model
from workers.analysis.peak_interval import peak_intervals
from workers.analysis.peaks import Peak, find_peaks, find_utilisation
from workers.analysis.quality import mesh_quality
from workers.analysis.recovery import Recovery, Temperature
from workers.analysis.resultants import equilibrium, imbalance, reactions
from workers.analysis.samples import Samples
from workers.analysis.sizes_wanted import SizesWanted
from workers.analysis.solution import Solution, SolverReport
from workers.analysis.zones import Zones
from workers.errors import Fault, MeshError
from workers.job import Combination

Array = NDArray[np.float64]
Json = dict[str, Any]
Progress = Callable[[str, float], None]

CHUNK_BYTES = 200e6  # for the states that are worked on together
STAGE = "recovering"


def summarise(
    solution: Solution,
    recovery: Recovery,
    states: States,
    progress: Progress | None = None,
    envelope: Envelope | None = None,
    wanted: SizesWanted | None = None,
) -> Json:
    """Results of all states.

    Parameters
    ----------
    progress : called with the stage and the fraction of it that is done
    envelope : takes in every state, for whoever wants its fields afterwards
    wanted : takes in the element errors of every state, for whoever refines the mesh

    Returns
    -------
    dict with `units`, `solver`, `mesh`, `cases`, `combinations`, `envelope`, `probes`, `lines`,
    `cuts`, `hot_spots` and `convergence`; plain floats, strings and lists.

    Raises
    ------
    MeshError   a probe, line or cut cannot be where the job puts it; carries all such faults.
    """
    job = solution.model.job
    samples = Samples(recovery.field_mesh, job, states)
    cuts = _cuts(solution, states)
    by_state = _balances(solution, states)
    zones = Zones.build(solution, recovery.field_mesh, states)
    for columns in states.chunks(states_at_once(recovery)):
        results = _strain_and_stress(
            solution, recovery, states, columns, zones, (samples, envelope, wanted)
        )
        for column, result in zip(columns, results, strict=True):
            by_state[column] = result | by_state[column]
        if progress is not None:
            progress(STAGE, columns.stop / len(states))
    by_name = dict(zip(states.names, by_state, strict=True))
    return {
        "units": {
            "length": job.units.length,
            "force": job.units.force,
            "stress": job.units.stress,
        },
        "solver": _solver(solution.solver),
        "mesh": mesh_figures(solution.model),
        "cases": {
            **{case.name: by_name[case.name] for case in job.load_cases if not job.cases},
            **_with_factors(job.cases, by_name),
        },
        "combinations": _with_factors(job.combinations, by_name),
        "envelope": _governing(states, by_state),
        "probes": samples.probes(),
        "lines": samples.lines(),
        "cuts": cuts,
        "hot_spots": samples.hot_spots(),
        "convergence": None,
    }


def states_at_once(recovery: Recovery) -> int:
    """How many states fit CHUNK_BYTES.

    When the measures are formed there are displacements at nodes and points, the recovered stress
    and the five measures; the samples of the stress are gone by then.
    """
    points, samples = recovery.operator.shape
    nodes = recovery.model.mesh.node_count
    numbers = 2 * nodes + max((2 + 3 + 5) * points, 3 * points + 3 * samples)
    return max(1, int(CHUNK_BYTES / (8 * numbers)))


def form_envelope(
    recovery: Recovery, displacement: Array, temperature: Temperature, states: States
) -> Envelope:
    """The envelope alone, of the displacements (N, 2, c) of the load cases."""
    envelope = Envelope()
    for columns in states.chunks(states_at_once(recovery)):
        u = superpose(displacement, states, columns)
        stress = recovery.nodal_stress(u, superpose_blocks(temperature, states, columns))
        envelope.include(columns, measures(u[recovery.field_mesh.origin], stress))
    return envelope


# --- one chunk of states -------------------------------------------------------------------------


def _strain_and_stress(
    solution: Solution,
    recovery: Recovery,
    states: States,
    columns: range,
    zones: Zones,
    listeners: tuple[Samples, Envelope | None, SizesWanted | None],
) -> list[Json]:
    """Peaks, error estimate and utilisation of some states; feeds those who listen."""
    field_mesh = recovery.field_mesh
    displacement = superpose(solution.displacement, states, columns)
    temperature = superpose_blocks(solution.temperature, states, columns)
    stress = recovery.nodal_stress(displacement, temperature)
    estimate = estimate_error(recovery, displacement, stress, temperature)
    at_points = displacement[field_mesh.origin]
    values = measures(at_points, stress)
    samples, envelope, wanted = listeners
    samples.include(columns, at_points, stress)
    if envelope is not None:
        envelope.include(columns, values)
    if wanted is not None:
        wanted.include(estimate)
    excluded = zones.within(columns)
    peaks = find_peaks(field_mesh, values, error_stress(solution.model, estimate), excluded)
    intervals = peak_intervals(recovery, peaks, values, displacement, temperature)
    results: list[Json] = [
        {
            name: {
                **_peak(peak, row, field_mesh),
                "interval": intervals[name][row].tolist() if name in intervals else None,
                "singular": _singular(peak, row, zones, field_mesh, column),
            }
            for name, peak in peaks.items()
        }
        for row, column in enumerate(columns)
    ]
    errors = zip(estimate.relative.tolist(), estimate.energy_norm.tolist(), strict=True)
    for result, (relative, norm) in zip(results, errors, strict=True):
        result["error_estimate"] = {"relative": relative, "energy_norm": norm}
    strength = _yield_strength(solution.model)[field_mesh.region]
    utilisation = find_utilisation(values["von_mises"], strength, excluded)
    for row, result in enumerate(results):
        result["utilisation"] = utilisation and {
            "value": float(utilisation.value[row]),
            "yield_strength": float(strength[utilisation.point[row]]),
            **_place(utilisation.point[row], field_mesh),
        }
    return results


def _peak(peak: Peak, row: int, field_mesh: FieldMesh) -> Json:
    return {
        "value": float(peak.value[row]),
        "error": None if peak.error is None else float(peak.error[row]),
        "least": {"value": float(peak.least[row])},
        **_place(peak.point[row], field_mesh),
    }


def _singular(
    peak: Peak, row: int, zones: Zones, field_mesh: FieldMesh, column: int
) -> Json | None:
    """What the mesh shows at a singular place, if it is worse than the peak reported."""
    point = int(peak.singular[row])
    if point < 0:
        return None
    place = zones.place_of(field_mesh, point, column)
    return {
        "value": float(peak.singular_value[row]),
        "at": list(place.at),
        "kind": place.kind,
        "exponent": place.exponent,
        "radius": place.radius,
        "element_size": place.element_size,
        "confirmed": None,
    }


def _place(point: np.intp, field_mesh: FieldMesh) -> Json:
    return {
        "at": field_mesh.points[point].tolist(),
        "region": field_mesh.mesh.regions[field_mesh.region[point]],
    }


def _yield_strength(model: Model) -> Array:
    """By region; nan where the material does not say, (regions,) [F/L^2]."""
    stated = [model.job.material_of(region).yield_strength for region in model.mesh.regions]
    return np.array([np.nan if value is None else value for value in stated])


# --- what is linear in the loads -----------------------------------------------------------------


def _balances(solution: Solution, states: States) -> list[Json]:
    """Reactions and equilibrium of every state."""
    everything = range(len(states))
    at_supports = [
        (support, superpose(support.resultant, states, everything))
        for support in reactions(solution)
    ]
    balance = equilibrium(solution)
    applied, reaction = (
        superpose(part, states, everything) for part in (balance.applied, balance.reaction)
    )
    residual = imbalance(applied, reaction, balance.size @ np.abs(states.factors))
    return [
        {
            "reactions": {
                support.label: {
                    "force": resultant[:2, column].tolist(),
                    "moment": float(resultant[2, column]),
                    "about": support.about.tolist(),
                }
                for support, resultant in at_supports
            },
            "equilibrium": {
                "applied": applied[:, column].tolist(),
                "reaction": reaction[:, column].tolist(),
                "residual": float(residual[column]),
                "about": balance.about.tolist(),
            },
        }
        for column in everything
    ]


def _cuts(solution: Solution, states: States) -> Json:
    """Forces through all cuts; MeshError carries the faults of all."""
    found: Json = {}
    faults: list[Fault] = []
    places = Places(solution.model)
    for name, cut in solution.model.job.requests.cuts.items():
        try:
            carried = cut_forces(solution, cut, places)
        except MeshError as error:
            faults.extend(error.faults)
            continue
        parts = np.vstack((carried.normal, carried.shear, carried.moment))
        columns = superpose(parts, states, range(len(states))).T.tolist()
        found[name] = {
            state: {
                "normal": normal, "shear": shear, "moment": moment, "about": carried.about.tolist(),
            }
            for state, (normal, shear, moment) in zip(states.names, columns, strict=True)
        }  # fmt: skip
    if faults:
        raise MeshError(faults)
    return found


def _with_factors(sums: tuple[Combination, ...], by_name: dict[str, Json]) -> Json:
    return {one.name: {**by_name[one.name], "factors": dict(one.factors)} for one in sums}


# --- the job as a whole --------------------------------------------------------------------------


def _governing(states: States, by_state: list[Json]) -> Json:
    """The worst of all states for each measure, and the state's name."""
    found: Json = {}
    for name, sign in {**WORST, "utilisation": 1}.items():
        stated = [n for n, result in enumerate(by_state) if result[name] is not None]
        if not stated:
            found[name] = None
            continue
        worst = max(stated, key=lambda n: sign * by_state[n][name]["value"])
        peak = {key: value for key, value in by_state[worst][name].items() if key != "least"}
        found[name] = peak | {"governs": states.names[worst]}
    return found


def _solver(report: SolverReport) -> Json:
    return {
        "name": report.name,
        "ordering": report.ordering,
        "dofs": report.dofs,
        "free_dofs": report.free_dofs,
        "factor_entries": report.factor_entries,
        "residual": float(report.residual.max()),
        "refinements": report.refinements,
        "reciprocal_condition": float(report.reciprocal_condition),
        "iteration": report.iteration
        and {
            "tolerance": TOLERANCE,
            "iterations": report.iteration.iterations,
            "energy_error": report.iteration.energy_error,
        },
        "seconds": {stage: float(seconds) for stage, seconds in report.seconds.items()},
    }


def mesh_figures(model: Model) -> Json:
    """What the mesh consists of: needed before and after a solution."""
    mesh, job = model.mesh, model.job
    elements: dict[str, int] = {}
    areas = np.zeros(len(mesh.regions))
    for block, section, volume in zip(mesh.blocks, model.sections, model.volumes, strict=True):
        elements[block.element.name] = elements.get(block.element.name, 0) + block.element_count
        areas += np.bincount(block.region, volume / section.thickness, minlength=len(areas))
    return {
        "nodes": mesh.node_count,
        "elements": elements,
        "dofs": mesh.dof_count,
        "regions": {
            name: {
                "thickness": job.thickness_of(name),
                "material": job.material_of(name).name,
                "area": float(area),
            }
            for name, area in zip(mesh.regions, areas, strict=True)
        },
        "quality": mesh_quality(mesh),
        "parts": mesh.component_count,
        "digest": mesh_digest(mesh),
    }
