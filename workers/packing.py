"""Tar files of a back-up: written with their digest, synced and then named; read with suspicion."""

import hashlib
import io
import os
import shutil
import tarfile
from collections.abc import Callable
from pathlib import Path, PurePosixPath
from typing import Any

from workers import durable
from workers.backup_folder import Packed
from workers.errors import BackupError

HALF = ".half-"  # begins the name of a file that is being written


class Packer:
    """A tar file in the making; each file in it is added once."""

    def __init__(self, tar: tarfile.TarFile) -> None:
        self._tar = tar

    def add(self, name: str, content: bytes) -> None:
        """Add bytes under a name."""
        self._tar.addfile(_entry(name, len(content)), io.BytesIO(content))

    def add_file(self, name: str, path: Path) -> None:
        """Add a file as it is, with its time."""
        with path.open("rb") as file:
            status = os.fstat(file.fileno())
            self._tar.addfile(_entry(name, status.st_size, status.st_mtime), file)

    def add_tree(self, name: str, folder: Path) -> None:
        """Add every file below a folder."""
        for parent, folders, files in os.walk(folder):
            folders.sort()
            for file in sorted(files):
                path = Path(parent, file)
                self.add_file(f"{name}/{path.relative_to(folder).as_posix()}", path)


def pack(folder: Path, name: Callable[[str], str], fill: Callable[[Packer], None]) -> Packed:
    """Write a tar file into a folder of back-ups; whole and on the disk, or not at all.

    name : its path below the folder, by its digest.
    fill : adds what is to be in it; what it raises passes through, and there is no file.
    """
    half = folder / f"{HALF}{os.getpid()}"
    try:
        with _Written(half) as written:
            with tarfile.open(fileobj=written, mode="w|", format=tarfile.PAX_FORMAT) as tar:
                fill(Packer(tar))
            os.fsync(written.fileno())
        packed = Packed(name(written.digest), written.digest, written.length)
        place = folder / packed.path
        make_folder(place.parent)
        durable.move(half, place)
    except BaseException:
        half.unlink(missing_ok=True)
        raise
    return packed


def unpack(file: Path, target: Path) -> None:
    """Write everything in a tar file below a folder.

    Raises
    ------
    BackupError   something in it is not a plain file below the folder.
    """
    try:
        with tarfile.open(file, "r|") as tar:
            for entry in tar:
                name = PurePosixPath(entry.name)
                content = tar.extractfile(entry) if entry.isreg() else None
                if content is None or name.is_absolute() or ".." in name.parts:
                    raise BackupError(f"{file} holds {entry.name!r}, which is not of a back-up")
                place = target / name
                place.parent.mkdir(parents=True, exist_ok=True)
                with place.open("wb") as out:
                    shutil.copyfileobj(content, out)
                os.utime(place, (entry.mtime, entry.mtime))
    except tarfile.TarError as error:
        raise BackupError(f"{file} is damaged: {error}") from error


def make_folder(folder: Path) -> None:
    """Create a folder that only its owner may look into, and those above it, durably."""
    if not folder.is_dir():
        make_folder(folder.parent)
        folder.mkdir(mode=0o700, exist_ok=True)
        durable.sync_folder(folder.parent)


class _Written(io.FileIO):
    """A new file that only its owner may read, digested while it is written."""

    def __init__(self, path: Path) -> None:
        super().__init__(path, "w", opener=lambda name, flags: os.open(name, flags, 0o600))
        self._sum = hashlib.sha256()
        self.length = 0

    def write(self, data: Any) -> int:
        self._sum.update(data)
        self.length += len(data)
        left = memoryview(data)
        while left:
            left = left[super().write(left) :]
        return len(data)

    @property
    def digest(self) -> str:
        return self._sum.hexdigest()


def _entry(name: str, size: int, mtime: float = 0.0) -> tarfile.TarInfo:
    entry = tarfile.TarInfo(name)
    entry.size, entry.mtime, entry.mode = size, mtime, 0o600
    return entry
