"""A back-up made while a real server works, and a new server on what is restored from it."""

import json
import shutil
import subprocess
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import psutil
import pytest

from tests.job_documents import strip
from tests.real_server import FISHPLATE
from tests.running_server import Server, running_server

pytestmark = pytest.mark.server

# Everything as it was when the job was packed; then a picture that is made when asked for, twice.
FILES = ("/archive.zip", "/results", "/fields/pull.vtu", "/previews/pull/model.png",
         "/tables/peaks.csv", "/sheet", "/previews/pull/von_mises.png")  # fmt: skip


def fishplate(*arguments: str | Path) -> "subprocess.CompletedProcess[str]":
    return subprocess.run([FISHPLATE, *arguments], capture_output=True, text=True, check=False)


@contextmanager
def resting_workers(server: Server) -> Iterator[None]:
    """Have the pool stand still, so that jobs are surely unfinished; the API goes on."""
    parts = psutil.Process(server.process.pid).children()
    (pool,) = (part for part in parts if "workers.pool" in part.cmdline())
    family = [pool, *(c for c in pool.children(recursive=True) if "redis" not in c.name())]
    for process in family:
        process.suspend()
    yield
    for process in family:
        process.resume()


def test_a_server_on_a_restored_store_serves_the_same_bytes_and_ends_what_was_unfinished(
    tmp_path: Path,
) -> None:
    """The strip: F / (40 mm x 8 mm), so 100, 200, ... MPa for 32, 64, ... kN; Q8 has it exactly."""
    old, folder, new = tmp_path / "old", tmp_path / "back-ups", tmp_path / "new"
    with running_server(old, "--workers", "1", pictures="1") as server:
        first = server.submit(strip())
        server.finished(first)
        made = fishplate("backup", folder, "--store", old)
        assert (made.returncode, "1 of them new" in made.stderr) == (0, True), made.stderr
        with resting_workers(server):
            waiting = {server.submit(strip(force=32e3 * n)): 100.0 * n for n in range(2, 6)}
            made = fishplate("backup", folder, "--store", old)
            assert (made.returncode, "4 unfinished" in made.stderr) == (0, True), made.stderr
            assert "0 of them new" in made.stderr
        before = {path: server.get(first + path) for path in FILES}
        refused = fishplate("restore", folder, "--store", old)
        assert (refused.returncode, "is not empty" in refused.stderr) == (1, True)
        for address in waiting:  # the server was not disturbed
            server.finished(address)

    damaged = tmp_path / "damaged"
    shutil.copytree(folder, damaged)
    (packed,) = damaged.glob("jobs/*/*.tar")
    content = bytearray(packed.read_bytes())
    content[len(content) // 2] ^= 1  # a single bit
    packed.write_bytes(content)
    refused = fishplate("restore", damaged, "--store", new)
    assert (refused.returncode, packed.name in refused.stderr) == (1, True)
    assert not new.exists()

    assert fishplate("restore", folder, "--check", "--store", new).returncode == 0
    done = fishplate("restore", folder, "--store", new)
    assert (done.returncode, "4 in line again" in done.stderr) == (0, True), done.stderr
    with running_server(new, "--workers", "1", pictures="0") as server:
        assert {path: server.get(first + path) for path in FILES} == before
        for address, stress in waiting.items():
            server.finished(address)
            results = json.loads(server.get(address + "/results"))
            assert results["cases"]["pull"]["von_mises"]["value"] == pytest.approx(stress, rel=1e-9)
        jobs = json.loads(server.get("/v1/jobs"))["jobs"]
        assert {job["id"] for job in jobs} == {a.rsplit("/", 1)[1] for a in (first, *waiting)}
