"""What an iterative solution may leave, and what it took."""

from dataclasses import dataclass

TOLERANCE = 1e-8  # norm of the residual over that of the load
# Estimated error in the energy norm over the norm of the solution. A slender plate has a small
# residual long before its displacements are right.
ENERGY_ERROR = 1e-6


@dataclass(frozen=True)
class Effort:
    """What the iteration took, and what it left, at worst of all right-hand sides."""

    iterations: int = 0
    energy_error: float = 0.0

    def worse(self, other: "Effort") -> "Effort":
        return Effort(
            max(self.iterations, other.iterations), max(self.energy_error, other.energy_error)
        )
