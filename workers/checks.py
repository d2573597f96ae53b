"""Where checks are kept for a while: documents that somebody wants looked over, and the answers.

    checks/ID/job.json     the document; its age counts from when it was last sent or read
              workspace    whose it is
              answer/      what a worker found, put in place by one rename

The id is a digest of workspace and document, so asking again is the same check. Nothing here
outlives an hour in which nobody sends it again, and nothing is worth protecting from a power cut.
Every method raises StoreError when the file system refuses.
"""

import hashlib
import os
import re
import shutil
import time
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from importlib.metadata import version
from pathlib import Path
from uuid import uuid4

from workers.errors import StoreError
from workers.record import DEFAULT_WORKSPACE

KEPT = 3600.0  # after the document was last sent or read [s]
ID_LENGTH = 32  # hexadecimal digits
DOCUMENT, WORKSPACE, ANSWER = "job.json", "workspace", "answer"

_ID = re.compile(f"[0-9a-f]{{{ID_LENGTH}}}")


class Checks:
    """The checks below one folder. Holds no state: any number of processes may share the folder."""

    def __init__(self, root: Path) -> None:
        self.root = Path(root) / "checks"

    def file(self, document: bytes, workspace: str = DEFAULT_WORKSPACE) -> str:
        """Keep a document for a worker, or keep it longer; returns the id of its check."""
        # No name of a workspace has a line break in it.
        digest = hashlib.sha256(f"{version('fishplate')}\n{workspace}\n".encode() + document)
        check_id = digest.hexdigest()[:ID_LENGTH]
        place = self._place(check_id)
        with _telling("the check could not be filed"):
            try:
                os.utime(place)
            except FileNotFoundError:
                place.parent.mkdir(parents=True, exist_ok=True)
                place.with_name(WORKSPACE).write_text(workspace)
                half = place.with_name(f".{uuid4().hex}")
                try:
                    half.write_bytes(document)
                    half.replace(place)  # from now on it is there
                finally:
                    half.unlink(missing_ok=True)
        return check_id

    def document(self, check_id: str) -> bytes:
        """The document of a check, which keeps it longer."""
        with _telling("the document of the check could not be read"):
            place = self._place(check_id)
            os.utime(place)
            return place.read_bytes()

    def answer(self, check_id: str) -> Path | None:
        """The folder with what was found; None where there is no answer yet."""
        folder = self._place(check_id).with_name(ANSWER)
        return folder if folder.is_dir() else None

    def workspace(self, check_id: str) -> str | None:
        """Whose check it is, answered or not; None where there is no such check."""
        if not _ID.fullmatch(check_id) or not self._place(check_id).is_file():
            return None
        with _telling("the check could not be read"):
            return self._place(check_id).with_name(WORKSPACE).read_text()

    def publish(self, check_id: str, found: Path) -> None:
        """Make a folder the answer; an answer that is there already stays."""
        with _telling("the answer of the check could not be filed"):
            if self.answer(check_id) is None:
                found.rename(self._place(check_id).with_name(ANSWER))

    def expires(self, check_id: str) -> float:
        """When the check may be removed if its document is not sent again [s since 1970]."""
        with _telling("the check could not be read"):
            return self._place(check_id).stat().st_mtime + KEPT

    def expire(self) -> None:
        """Remove what nobody has sent or read for an hour; never raises."""
        for folder in self._folders():
            with suppress(OSError):
                marks = [path for path in (folder, folder / DOCUMENT) if path.exists()]
                if max(path.stat().st_mtime for path in marks) < time.time() - KEPT:
                    # Renamed first: a check is there as a whole or not at all.
                    going = folder.rename(folder.with_name(f".{folder.name}-{uuid4().hex}"))
                    shutil.rmtree(going, ignore_errors=True)

    def _folders(self) -> list[Path]:
        with suppress(OSError):
            return [path for path in self.root.iterdir() if path.is_dir()]
        return []

    def _place(self, check_id: str) -> Path:
        if not _ID.fullmatch(check_id):
            raise StoreError(f"{check_id!r} is not the id of a check")
        return self.root / check_id / DOCUMENT


@contextmanager
def _telling(trouble: str) -> Iterator[None]:
    try:
        yield
    except FileNotFoundError as error:
        raise StoreError(f"{trouble}: it is gone; send its document again") from error
    except StoreError:
        raise
    except OSError as error:
        raise StoreError(error.errno, f"{trouble}: {error.strerror or error}") from error
