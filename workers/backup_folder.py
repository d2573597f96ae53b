"""What a folder of back-ups looks like, and how what is in it is checked.

    runs/RUN.json            the list of a run: every file that belongs to it, with its SHA-256
    runs/RUN.tar             tokens, audit log, and the unfinished jobs as their documents
    jobs/DAY/ID.DIGEST.tar   a final job, whole; written once, and shared by all runs that list it
    back-up.lock             held by the one process that writes

RUN is the time at which the run began (UTC), so that names sort by time. A list is written last: a
run that was interrupted is not there. Names of packed jobs hold a part of their digest: what one
run has listed, no later run replaces.
"""

import hashlib
from collections.abc import Iterator
from dataclasses import asdict, dataclass
from pathlib import Path, PurePosixPath
from typing import Any

import orjson

from workers.errors import BackupError
from workers.record import is_id
from workers.store_reader import telling

FORMAT = 1
JOBS, RUNS, LOCK = "jobs", "runs", "back-up.lock"
CHUNK = 1 << 20  # bytes read at a time


@dataclass(frozen=True)
class Packed:
    """A file of a back-up: its path below the folder, its digest and its length [bytes]."""

    path: str
    sha256: str
    bytes: int


@dataclass(frozen=True)
class Run:
    """One back-up of a whole store.

    layout : of the store (layout.py); by, at: the program that made it, and when (RFC 3339).
    jobs   : the final ones, by id; pinned: ids of those that were pinned.
    rest   : the file with everything else; unfinished: number of unfinished jobs in it.
    """

    name: str
    layout: int
    by: str
    at: str
    jobs: dict[str, Packed]
    pinned: tuple[str, ...]
    rest: Packed
    unfinished: int

    @property
    def files(self) -> tuple[Packed, ...]:
        return (*self.jobs.values(), self.rest)

    @property
    def length(self) -> int:
        """Bytes of all its files."""
        return sum(file.bytes for file in self.files)

    def as_bytes(self) -> bytes:
        """The list, with a digest of itself."""
        content = asdict(self)
        return orjson.dumps(
            {"format": FORMAT, "sha256": _digest(content), "run": content},
            option=orjson.OPT_APPEND_NEWLINE,
        )


def run_names(folder: Path) -> list[str]:
    """Names of the runs in a folder, oldest first."""
    with telling(f"the back-ups in {folder} could not be listed"):
        return sorted(path.stem for path in (folder / RUNS).glob("*.json"))


def list_path(folder: Path, name: str) -> Path:
    """Where the list of a run is."""
    return folder / RUNS / f"{name}.json"


def read_run(folder: Path, name: str) -> Run:
    """Read the list of a run.

    Raises
    ------
    BackupError   there is none, it is damaged, or a newer Fishplate has written it.
    """
    path = list_path(folder, name)
    if name not in run_names(folder):
        raise BackupError(f"there is no back-up {name!r} in {folder}")
    with telling(f"{path} could not be read"):
        text = path.read_bytes()
    try:
        document = orjson.loads(text)
        if document["format"] > FORMAT:
            raise BackupError(f"{path} was written by a newer Fishplate; restore it with that one")
        content = document["run"]
        if document["sha256"] != _digest(content):
            raise ValueError("its digest does not agree")
        jobs = {job_id: _file(entry) for job_id, entry in content["jobs"].items()}
        if not all(map(is_id, jobs)):
            raise ValueError("something in it is no job")
        about = {**content, "jobs": jobs, "rest": _file(content["rest"])}
        return Run(**{**about, "pinned": tuple(content["pinned"])})
    except (ValueError, TypeError, LookupError, AttributeError) as error:
        raise BackupError(f"{path} is damaged: {error}") from error


def damage(folder: Path, run: Run) -> Iterator[str]:
    """Read every file of a run; say of each what is wrong with it, by name."""
    for file in run.files:
        path = folder / file.path
        try:
            digest, length = _digest_of(path)
        except FileNotFoundError:
            yield f"{path} is missing"
        except OSError as error:
            yield f"{path} cannot be read: {error.strerror or error}"
        else:
            if length != file.bytes:
                yield f"{path} is damaged: it has {length} bytes, not {file.bytes}"
            elif digest != file.sha256:
                yield f"{path} is damaged: its SHA-256 is another"


def _file(entry: Any) -> Packed:
    file = Packed(**entry)
    path = PurePosixPath(file.path)
    if path.is_absolute() or ".." in path.parts:
        raise ValueError(f"{file.path} is not in the folder")
    return file


def _digest(content: Any) -> str:
    return hashlib.sha256(orjson.dumps(content, option=orjson.OPT_SORT_KEYS)).hexdigest()


def _digest_of(path: Path) -> tuple[str, int]:
    digest, length = hashlib.sha256(), 0
    with path.open("rb") as file:
        while chunk := file.read(CHUNK):
            digest.update(chunk)
            length += len(chunk)
    return digest.hexdigest(), length
