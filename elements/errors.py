"""Errors of the element layer, and the root of the family tree.

FishplateError
├── ElementError                         (elements/errors.py)
│   ├── DegenerateElementError           det J <= 0 somewhere in an element
│   ├── UnknownElementError              no such element type is installed
│   └── ElementRegistrationError         a plug-in is broken or its name is taken
├── DocumentError                        (workers/errors.py) the job document is wrong
├── LimitError                           the job is larger than the operator allows
├── MeshError                            the plate could not be meshed
├── AnalysisError                        the system could not be solved
│   ├── MechanismError                   the plate, or a part of it, is free to move
│   └── SingularMatrixError              (workers/analysis/solver.py) the matrix has no factor
├── PicturesUnavailableError             this machine cannot render
├── SettingsError                        an environment variable is wrong
├── TokenError                           a token cannot be made or revoked as asked
└── StoreError                           the job store refused
    ├── UnknownJobError
    ├── NotFinalError
    ├── PinnedError                      the job is kept on purpose
    ├── TransitionError                  no such change of state
    └── KeyConflictError                 an Idempotency-Key was used for another document
"""

from collections.abc import Sequence


class FishplateError(Exception):
    """Root of every error that Fishplate raises on purpose."""


class ElementError(FishplateError):
    """Something about an element type or an element."""


class DegenerateElementError(ElementError, ValueError):
    """An element is folded, flat or listed clockwise: det J <= 0.

    Attributes
    ----------
    element_type : str               name of the type
    elements : tuple of int          positions in the batch
    points : tuple of int            the worst integration point of each element
    det_J : tuple of float           its Jacobian determinant [L^2]
    """

    def __init__(
        self,
        element_type: str,
        elements: Sequence[int],
        points: Sequence[int],
        det_J: Sequence[float],
    ) -> None:
        self.element_type = element_type
        self.elements = tuple(int(e) for e in elements)
        self.points = tuple(int(p) for p in points)
        self.det_J = tuple(float(d) for d in det_J)
        listed = "; ".join(
            f"element {e}: det J = {d:.3g} at point {p}"
            for e, p, d in zip(self.elements[:5], self.points, self.det_J, strict=False)
        )
        more = f" (and {len(self.elements) - 5} more)" if len(self.elements) > 5 else ""
        super().__init__(
            f"{element_type}: {listed}{more}; list the corners counter-clockwise and keep every "
            "corner angle below 180 degrees"
        )


class UnknownElementError(ElementError, LookupError):
    """No element type of that name is installed."""

    def __init__(self, name: str, available: Sequence[str]) -> None:
        self.name = name
        self.available = tuple(available)
        super().__init__(
            f"no element type {name!r} is installed; available: {', '.join(self.available)}"
        )


class ElementRegistrationError(ElementError, TypeError):
    """A plug-in cannot be loaded, breaks the contract, or claims a name that is taken."""
