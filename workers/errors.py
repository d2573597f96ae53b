"""Errors of the worker layer; the family tree stands in elements/errors.py.

Each error keeps its facts as attributes. `faults` is the common currency: what the API and the
job record show to a client is a list of (pointer, message).
"""

from collections.abc import Iterable, Sequence
from dataclasses import dataclass

from elements.errors import FishplateError


@dataclass(frozen=True)
class Fault:
    """One thing that is wrong, and where.

    pointer : JSON pointer (RFC 6901) into the job document; "" is the whole document.
    message : what was seen, what is allowed, what to do.
    """

    pointer: str
    message: str

    def as_json(self) -> dict[str, str]:
        return {"pointer": self.pointer, "message": self.message}


class FaultyError(FishplateError):
    """An error that consists of faults in named places of the job document."""

    def __init__(self, faults: Iterable[Fault]) -> None:
        self.faults: tuple[Fault, ...] = tuple(faults)
        super().__init__("; ".join(f"{f.pointer or '/'}: {f.message}" for f in self.faults))


class DocumentError(FaultyError, ValueError):
    """The job document is wrong; carries every fault found, not only the first."""


class LimitError(FaultyError, ValueError):
    """The job is larger than the operator allows."""


class MeshError(FaultyError, ValueError):
    """The plate could not be meshed, or something named is not on the mesh."""


class AnalysisError(FaultyError, ArithmeticError):
    """The system of equations could not be solved reliably."""


class MechanismError(AnalysisError):
    """The plate, or a part of it, is free to move.

    motions : one sentence for each free motion, e.g. "part 2 of 2 (12 nodes near (40, 10)) can
        rotate about (0, 0)".
    """

    def __init__(self, motions: Sequence[str], pointer: str = "/supports") -> None:
        self.motions = tuple(motions)
        super().__init__(
            Fault(pointer, f"{motion}; add a support that holds it") for motion in self.motions
        )


class PicturesUnavailableError(FishplateError, RuntimeError):
    """This machine cannot render off-screen; the message says why."""


class StoreError(FishplateError, OSError):
    """The job store could not do what was asked."""


class LayoutError(StoreError):
    """The store is laid out otherwise than this program expects, or is being changed."""


class BackupError(StoreError):
    """A back-up cannot be made or restored; the message names the file that is to blame."""


class UnknownJobError(StoreError, LookupError):
    """There is no job of that id."""


class NotFinalError(StoreError):
    """The job has no results yet."""


class PinnedError(StoreError):
    """The job is kept on purpose and cannot be removed."""


class TransitionError(StoreError):
    """A job cannot go from the state that it is in to the one asked for."""

    def __init__(self, job_id: str, state: str, wanted: str) -> None:
        self.job_id = job_id
        self.state = state
        self.wanted = wanted
        super().__init__(f"job {job_id} is {state}; it cannot become {wanted}")


class KeyConflictError(StoreError):
    """An Idempotency-Key was used before, for another document."""

    def __init__(self, job_id: str) -> None:
        self.job_id = job_id
        super().__init__(
            f"this Idempotency-Key belongs to job {job_id}, whose document is another; "
            "use a new key for a new document"
        )


class SettingsError(FishplateError, ValueError):
    """An environment variable of Fishplate is wrong or not known."""


class TokenError(FishplateError, ValueError):
    """A token cannot be made or revoked as asked."""
