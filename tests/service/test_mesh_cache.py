"""Meshes kept on disk: found again when they fit, made again when they do not or cannot be read."""

import dataclasses
import multiprocessing
import os
from concurrent.futures import ProcessPoolExecutor
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from tests.good_documents import good
from workers import mesh_cache
from workers.analysis.mesh import Mesh
from workers.analysis.meshing.build import mesh_job
from workers.document.read import load
from workers.geometry import OutlineGeometry
from workers.job import Job
from workers.mesh_cache import MeshCache, digest


def lug(**meshing: Any) -> Job:
    document = good("outline")
    document["meshing"] = {"element": "T6", "size": 25, **meshing}
    return load(document)


@pytest.fixture
def made(monkeypatch: pytest.MonkeyPatch) -> list[Job]:
    """Counts what is really meshed."""
    jobs: list[Job] = []

    def counted(job: Job) -> Mesh:
        jobs.append(job)
        return mesh_job(job)

    monkeypatch.setattr(mesh_cache, "mesh_job", counted)
    return jobs


def assert_same(one: Mesh, other: Mesh) -> None:
    np.testing.assert_array_equal(one.nodes, other.nodes, strict=True)
    assert (one.regions, dict(one.points)) == (other.regions, dict(other.points))
    assert list(one.sides) == list(other.sides)
    for name, facets in one.sides.items():
        np.testing.assert_array_equal(facets, other.sides[name], strict=True)
    for a, b in zip(one.blocks, other.blocks, strict=True):
        assert a.element is b.element
        np.testing.assert_array_equal(a.connectivity, b.connectivity, strict=True)
        np.testing.assert_array_equal(a.region, b.region, strict=True)


def test_second_job_on_the_same_plate_is_not_meshed(tmp_path: Path, made: list[Job]) -> None:
    """From another object on the same folder, as in another process; bitwise the same mesh."""
    first = MeshCache(tmp_path / "meshes").mesh_job(lug())
    again = MeshCache(tmp_path / "meshes").mesh_job(lug())
    assert len(made) == 1
    assert_same(first, again)


def test_other_loads_materials_and_thicknesses_use_the_same_mesh(
    tmp_path: Path, made: list[Job]
) -> None:
    job, cache = lug(), MeshCache(tmp_path)
    cache.mesh_job(job)
    geometry = job.geometry
    assert isinstance(geometry, OutlineGeometry)
    thicker = tuple(dataclasses.replace(region, thickness=99.0) for region in geometry.regions)
    cache.mesh_job(
        dataclasses.replace(
            job,
            load_cases=job.load_cases[:1],
            supports=job.supports[:1],
            plate=dataclasses.replace(job.plate, thickness=1.0),
            geometry=dataclasses.replace(geometry, regions=thicker),
        )
    )
    assert len(made) == 1


@pytest.mark.parametrize(
    "change",
    [
        {"element": "Q8"},
        {"size": 24},
        {"sizes": {"pin": 5}},
        {"sizes": {"base": 5}},
    ],
)
def test_other_meshing_is_meshed(tmp_path: Path, change: dict[str, Any]) -> None:
    assert digest(lug(**change)) != digest(lug())


@pytest.mark.parametrize(
    ("path", "value"),
    [
        (("outline", 0, "at"), [0, 0.001]),
        (("outline", 0, "side"), "floor"),
        (("outline", 2, "through"), [80, 171]),
        (("outline", 1, "fillet"), 9),
        (("holes", 0, "circle", "radius"), 26),
        (("holes", 1, "outline", 0, "at"), [20, 21]),
        (("regions", 0, "circle", "radius"), 46),
        (("points", "tip"), [80, 169]),
    ],
)
def test_every_part_of_the_shape_counts(path: tuple[Any, ...], value: Any) -> None:
    document = good("outline")
    document["supports"] = [{"on": "left", "ux": 0, "uy": 0}]
    document["load_cases"] = {"lift": [{"on": "pin", "bearing": [0, 1]}]}
    document.pop("combinations")
    document["meshing"] = {"size": 25}
    before = digest(load(document))
    part: Any = document["geometry"]
    for key in path[:-1]:
        part = part[key]
    part[path[-1]] = value
    assert digest(load(document)) != before


@pytest.mark.parametrize("damage", [b"", b"PK\x03\x04 nonsense", None])
def test_damaged_file_is_made_again(tmp_path: Path, made: list[Job], damage: bytes | None) -> None:
    """Empty, no archive at all, or one byte of the nodes changed (the archive has checksums)."""
    cache = MeshCache(tmp_path)
    good_mesh = cache.mesh_job(lug())
    (path,) = tmp_path.glob("*.npz")
    data = bytearray(path.read_bytes())
    data[len(data) // 2] ^= 0xFF
    path.write_bytes(data if damage is None else damage)
    assert_same(good_mesh, cache.mesh_job(lug()))
    assert len(made) == 2
    cache.mesh_job(lug())
    assert len(made) == 2


def test_meshes_used_longest_ago_make_room(tmp_path: Path, made: list[Job]) -> None:
    jobs = [lug(size=size) for size in (25, 26, 27)]
    size = sum(len(a.tobytes()) for a in _arrays_of(mesh_job(jobs[0])))
    cache = MeshCache(tmp_path, limit=int(2.7 * size))  # room for two
    cache.mesh_job(jobs[0])
    cache.mesh_job(jobs[1])
    for age, job in ((2000, jobs[1]), (3000, jobs[0])):
        os.utime(tmp_path / f"{digest(job)}.npz", (age, age))
    cache.mesh_job(jobs[0])  # the older one, but used now
    cache.mesh_job(jobs[2])
    kept = {path.stem for path in tmp_path.glob("*.npz")}
    assert kept == {digest(jobs[0]), digest(jobs[2])}


def _arrays_of(mesh: Mesh) -> list[np.ndarray]:
    return [mesh.nodes, *(a for b in mesh.blocks for a in (b.connectivity, b.region))]


def test_folder_that_cannot_be_written_costs_only_time(tmp_path: Path, made: list[Job]) -> None:
    """A file stands where the folder should be."""
    (tmp_path / "meshes").write_bytes(b"")
    cache = MeshCache(tmp_path / "meshes")
    cache.mesh_job(lug())
    cache.mesh_job(lug())
    assert len(made) == 2


def test_half_written_files_of_killed_processes_are_removed(tmp_path: Path) -> None:
    cache = MeshCache(tmp_path)
    old, young = tmp_path / "new-old.npz", tmp_path / "new-young.npz"
    for path in (old, young):
        path.write_bytes(b"half")
    os.utime(old, (0, 0))
    cache.mesh_job(lug())
    assert not old.exists()
    assert young.exists()


def test_processes_may_share_the_folder(tmp_path: Path) -> None:
    """Four forked processes mesh the same plate at once; each gets the same mesh."""
    fork = multiprocessing.get_context("fork")
    with ProcessPoolExecutor(4, mp_context=fork) as pool:
        sums = list(pool.map(_sum_of_nodes, [tmp_path] * 4))
    assert len(set(sums)) == 1
    assert len(list(tmp_path.iterdir())) == 1


def _sum_of_nodes(folder: Path) -> float:
    return float(MeshCache(folder).mesh_job(lug()).nodes.sum())


def test_patches_are_made_as_they_are(tmp_path: Path, made: list[Job]) -> None:
    MeshCache(tmp_path).mesh_job(load(good("patches")))
    assert not made or not list(tmp_path.iterdir())
