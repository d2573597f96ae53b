"""Memory that a solution takes beyond the resting process, from measured jobs [bytes].

How the coefficients were measured stands in `workers/estimate.py`.
"""


def direct_memory(dofs: float, entries: float) -> float:
    """Peak of assembly and factorisation; entries : numbers in the factor."""
    return 6.5e6 + 610 * dofs + 14.8 * entries


def iterative_memory(dofs: float) -> float:
    """Peak of assembly, setting up the levels, and solving."""
    return 20e6 + 1850 * dofs
