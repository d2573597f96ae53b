"""All verification cases, in the order of the record."""

from types import ModuleType

from workers.verification import (
    benchmark_cases,
    element_cases,
    exact_cases,
    field_cases,
    statics_cases,
)
from workers.verification.case import Case

GROUPS: dict[str, tuple[ModuleType, ...]] = {
    "Exact, to rounding": (element_cases, exact_cases, statics_cases),
    "Closed forms, by convergence": (field_cases,),
    "Published benchmarks and handbook values": (benchmark_cases,),
}

CASES: dict[str, tuple[Case, ...]] = {
    group: tuple(
        value for module in modules for value in vars(module).values() if isinstance(value, Case)
    )
    for group, modules in GROUPS.items()
}
