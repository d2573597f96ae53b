"""Everything of a finished job as one ZIP file, made while it is sent.

Files go through in pieces, so that memory does not grow with them, and what cannot be made smaller
is stored as it is. The last entry lists the SHA-256 of every other one, as `sha256sum --check`
reads it.
"""

import hashlib
from collections.abc import Iterator
from datetime import UTC, datetime
from pathlib import Path
from zipfile import ZIP_DEFLATED, ZIP_STORED, ZipFile, ZipInfo

MANIFEST = "manifest.sha256"
PIECE = 1 << 18  # bytes read at once
PACKED = {".png", ".vtu", ".npz", ".npy"}  # compressed already, or plain floating-point numbers
EARLIEST = datetime(1980, 1, 1, tzinfo=UTC)  # that a ZIP file can tell


def members(folder: Path) -> list[Path]:
    """The files of the results, in the order of their names; hidden ones are not the client's."""
    return sorted(
        path
        for path in folder.rglob("*")
        if path.is_file() and not any(p.startswith(".") for p in path.relative_to(folder).parts)
    )


def fingerprint(folder: Path) -> str:
    """Differs once a file is added; published files never change."""
    listing = "\n".join(
        f"{path.relative_to(folder)} {path.stat().st_size}" for path in members(folder)
    )
    return hashlib.sha256(listing.encode()).hexdigest()


def stream_archive(folder: Path) -> Iterator[bytes]:
    """The ZIP file piece by piece.

    Raises
    ------
    OSError   a file could not be read, for instance because the job was removed meanwhile; what
        was sent so far is no ZIP file then.
    """
    sink = _Sink()
    with ZipFile(sink, "w") as archive:
        sums = []
        for path in members(folder):
            name = path.relative_to(folder).as_posix()
            digest = hashlib.sha256()
            with path.open("rb") as file, archive.open(_entry(path, name), "w") as entry:
                while piece := file.read(PIECE):
                    digest.update(piece)
                    entry.write(piece)
                    yield from sink.drain()
            sums.append(f"{digest.hexdigest()}  {name}\n")
        manifest = ZipInfo(MANIFEST)  # without the time of now: the same files, the same bytes
        manifest.external_attr = 0o644 << 16
        archive.writestr(manifest, "".join(sums))
    yield from sink.drain()


def _entry(path: Path, name: str) -> ZipInfo:
    facts = path.stat()
    moment = max(EARLIEST, datetime.fromtimestamp(facts.st_mtime, UTC))
    info = ZipInfo(name, moment.timetuple()[:6])
    info.file_size = facts.st_size  # tells whether sizes need 64 bits
    info.compress_type = ZIP_STORED if path.suffix in PACKED else ZIP_DEFLATED
    info.external_attr = 0o644 << 16
    return info


class _Sink:
    """What a ZIP file is written to: keeps the pieces until they are taken away.

    Without `seek`, so that sizes and checksums are written behind each entry.
    """

    def __init__(self) -> None:
        self._pieces: list[bytes] = []

    def write(self, piece: bytes) -> int:
        self._pieces.append(bytes(piece))
        return len(piece)

    def flush(self) -> None:
        """Nothing is held back."""

    def close(self) -> None:
        """Nothing is held open."""

    def drain(self) -> list[bytes]:
        pieces, self._pieces = self._pieces, []
        return pieces
