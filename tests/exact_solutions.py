"""Exact plane-stress solutions, and finite-element solutions of them for tests to measure.

They live in the package, because `fishplate verify` runs on them too.
"""

from workers.verification.exact import Exact, cantilever, kirsch, lame, waves
from workers.verification.solving import (
    Errors,
    measure_errors,
    solve_with,
    solve_with_exact_border,
)

__all__ = [
    "Errors",
    "Exact",
    "cantilever",
    "kirsch",
    "lame",
    "measure_errors",
    "solve_with",
    "solve_with_exact_border",
    "waves",
]
