"""What an analysis takes for granted, as far as this job makes use of it."""

from collections.abc import Iterator
from types import UnionType

from workers.job import (
    Acceleration,
    Bearing,
    BodyForce,
    Job,
    Load,
    PointForce,
    Spin,
    TemperatureChange,
    TotalForce,
    TotalMoment,
)


def assumptions(job: Job) -> list[str]:
    """One sentence or two for each, the general ones first."""
    return [*_of_every_plate(job), *_of_supports(job), *_of_loads(job), *_of_results(job)]


def _of_every_plate(job: Job) -> Iterator[str]:
    yield (
        "Linear elastic, isotropic material; small displacements and strains; plane stress "
        "(nothing varies through the thickness, no stress acts across it)."
    )
    yield "All loads and supports act in the middle plane of the plate."
    if any(region.thickness is not None for region in job.geometry.regions):
        yield (
            "Regions of different thickness share one middle plane; the stress that a step raises "
            "across the thickness is not in the model."
        )


def _of_supports(job: Job) -> Iterator[str]:
    if any(s.spring is None or s.ux is not None or s.uy is not None for s in job.supports):
        yield "Supports hold exactly, push and pull alike: they do not give way, lift off or slip."
    if any(support.spring is not None for support in job.supports):
        yield "Springs are linear and act in push and pull alike."


def _of_loads(job: Job) -> Iterator[str]:
    if _any(job, Bearing):
        yield (
            "A bearing force is a cosine pressure over the loaded half of its hole, without "
            "friction; fit, clearance and stiffness of the pin are not in the model."
        )
    if _any(job, TotalForce | TotalMoment):
        yield "Forces spread over a side are even along it, moments linear, whatever applies them."
    if _any(job, PointForce):
        yield "A force at a point is ideal: the stress right under it is no material stress."
    if _any(job, Acceleration | BodyForce | Spin):
        yield "Body forces are static; sway, impact and vibration are not in them unless factored."
    if _any(job, TemperatureChange):
        yield (
            "Temperature changes are even through the thickness, and change no material property."
        )


def _of_results(job: Job) -> Iterator[str]:
    if job.combinations:
        yield (
            "Combinations add displacements and stress components; von Mises and principal "
            "stresses are formed from the sums."
        )
    if job.combinations and any(_moves(job)):
        yield (
            "Prescribed displacements that belong to every case enter a combination with the sum "
            "of its factors."
        )
    yield (
        "Stresses are recovered from the superconvergent points within one region (Zienkiewicz "
        "and Zhu 1992); the error shown is an estimate from that recovery, not a bound."
    )


def _moves(job: Job) -> Iterator[bool]:
    for support in job.supports:
        values = (support.ux, support.uy, support.normal, support.displacement)
        yield support.case is None and any(values)


def _any(job: Job, kind: type[Load] | UnionType) -> bool:
    return any(isinstance(load, kind) for case in job.load_cases for load in case.loads)
