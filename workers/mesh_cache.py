"""Meshes kept on disk, so that hundreds of jobs on one plate mesh it once.

A mesh is found again by a digest of what it follows from: shapes, names and sizes, not materials,
loads or supports. It is a convenience: what cannot be read is made again, what cannot be written is
not kept. Any number of processes may share the folder; the meshes used longest ago make room.
"""

import hashlib
import logging
import os
import tempfile
import time
import zipfile
from collections.abc import Iterator
from contextlib import suppress
from importlib.metadata import version
from pathlib import Path
from typing import Any

import orjson

from workers.analysis.mesh import Mesh
from workers.analysis.meshing.build import mesh_job
from workers.geometry import Hole, OutlineGeometry, Region, Vertex
from workers.job import Job
from workers.mesh_file import read_mesh, write_mesh

FORMAT = 1  # of the files, and of what goes into the digest
LIMIT = 512 * 1024**2  # bytes of all files
UNFINISHED = "new-"  # begins the name of a file that is being written
ABANDONED = 3600.0  # age of a half-written file that nobody writes any more [s]

log = logging.getLogger(__name__)


class MeshCache:
    """The meshes in one folder."""

    def __init__(self, folder: Path, limit: int = LIMIT) -> None:
        self.folder = Path(folder)
        self.limit = limit

    def mesh_job(self, job: Job) -> Mesh:
        """As `meshing.build.mesh_job`; of an outline the mesh that was kept, if there is one."""
        if not isinstance(job.geometry, OutlineGeometry):
            return mesh_job(job)
        path = self.folder / f"{digest(job)}.npz"
        mesh = self._read(path)
        if mesh is None:
            mesh = mesh_job(job)
            self._write(path, mesh)
        return mesh

    def _read(self, path: Path) -> Mesh | None:
        try:
            mesh = read_mesh(path)
            os.utime(path)  # used just now
        except FileNotFoundError:
            return None
        except (OSError, ValueError, LookupError, EOFError, zipfile.BadZipFile) as error:
            log.warning("mesh %s cannot be read and is made again: %s", path.name, error)
            with suppress(OSError):
                path.unlink()
            return None
        return mesh

    def _write(self, path: Path, mesh: Mesh) -> None:
        try:
            self.folder.mkdir(parents=True, exist_ok=True)
            descriptor, name = tempfile.mkstemp(dir=self.folder, prefix=UNFINISHED, suffix=".npz")
            os.close(descriptor)
            scratch = Path(name)
            try:
                write_mesh(scratch, mesh)
                scratch.replace(path)
            except BaseException:
                scratch.unlink(missing_ok=True)
                raise
            self._make_room()
        except OSError as error:
            log.warning("mesh %s is not kept: %s", path.name, error)

    def _make_room(self) -> None:
        """Remove what was used longest ago until the rest is within the limit."""
        found = sorted(self._files(), key=lambda entry: entry[1], reverse=True)
        total = 0
        for path, used, size in found:
            total += size
            is_abandoned = path.name.startswith(UNFINISHED) and used < time.time() - ABANDONED
            if total > self.limit or is_abandoned:
                path.unlink(missing_ok=True)

    def _files(self) -> Iterator[tuple[Path, float, int]]:
        for path in self.folder.iterdir():
            try:
                status = path.stat()
            except FileNotFoundError:  # another process made room
                continue
            yield path, status.st_mtime, status.st_size


# --- what a mesh follows from -----------------------------------------------------------------


def digest(job: Job) -> str:
    """Hexadecimal digest of all that the mesh of an outline depends on."""
    geometry, meshing = job.geometry, job.meshing
    if not isinstance(geometry, OutlineGeometry):
        raise TypeError("only outlines have a digest")
    parts = {
        "versions": [FORMAT, version("fishplate"), version("netgen-mesher"), version("shapely")],
        "outline": [_vertex(vertex) for vertex in geometry.outline],
        "holes": [_shaped(hole) for hole in geometry.holes],
        "regions": [_shaped(region) for region in geometry.regions],
        "points": dict(geometry.points),
        "meshing": [meshing.element, meshing.size, dict(meshing.sizes)],
    }
    return hashlib.sha256(orjson.dumps(parts, option=orjson.OPT_SORT_KEYS)).hexdigest()


def _shaped(part: Hole | Region) -> list[Any]:
    shape = part.shape
    if isinstance(shape, tuple):
        return [part.name, [_vertex(vertex) for vertex in shape]]
    return [part.name, None if shape is None else [*shape.centre, shape.radius]]


def _vertex(vertex: Vertex) -> list[Any]:
    return [vertex.at, vertex.side, vertex.through, vertex.fillet, vertex.fillet_side]
