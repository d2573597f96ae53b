"""The archive: read back by the standard library's ZIP reader and by sha256sum."""

import io
import os
import subprocess
import tracemalloc
from pathlib import Path
from zipfile import ZIP_DEFLATED, ZIP_STORED, ZipFile

import pytest

from workers.outputs.archive import MANIFEST, fingerprint, stream_archive

FILES = {
    "job.json": b"{}" * 5000,
    "previews/lift, tide/von_mises.png": os.urandom(3000),
    "previews/lift, tide/model.png": b"",
    "tables/peaks.csv": b"case\r\n" * 100,
    "fields/%D0%BF.vtu": os.urandom(700_000),
}


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    for name, data in {**FILES, ".record.json": b"ours"}.items():
        path = tmp_path / "results" / name
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_bytes(data)
    return tmp_path / "results"


def check_sums(folder: Path) -> tuple[int, str]:
    command = ["sha256sum", "--check", "--strict", MANIFEST]
    checked = subprocess.run(command, cwd=folder, capture_output=True, text=True, check=False)
    return checked.returncode, checked.stdout + checked.stderr


def test_every_file_is_in_it_and_nothing_hidden(folder: Path) -> None:
    with ZipFile(io.BytesIO(b"".join(stream_archive(folder)))) as archive:
        assert archive.testzip() is None
        assert set(archive.namelist()) == {*FILES, MANIFEST}
        for name, data in FILES.items():
            assert archive.read(name) == data


def test_the_manifest_is_what_sha256sum_checks(folder: Path, tmp_path: Path) -> None:
    with ZipFile(io.BytesIO(b"".join(stream_archive(folder)))) as archive:
        archive.extractall(tmp_path / "out")
    status, said = check_sums(tmp_path / "out")
    assert (status, said.count(": OK")) == (0, len(FILES)), said
    (tmp_path / "out" / "job.json").write_bytes(b"{ }")
    assert check_sums(tmp_path / "out")[0] != 0


def test_the_same_files_give_the_same_bytes_at_any_time(
    folder: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    now = b"".join(stream_archive(folder))
    monkeypatch.setattr("time.time", lambda: 2.0e9)
    assert b"".join(stream_archive(folder)) == now


def test_what_cannot_be_made_smaller_is_stored(folder: Path) -> None:
    with ZipFile(io.BytesIO(b"".join(stream_archive(folder)))) as archive:
        kinds = {info.filename: info.compress_type for info in archive.infolist()}
    assert kinds["fields/%D0%BF.vtu"] == kinds["previews/lift, tide/model.png"] == ZIP_STORED
    assert kinds["job.json"] == ZIP_DEFLATED


def test_memory_does_not_grow_with_the_files(tmp_path: Path) -> None:
    """40 MB go through; a few pieces of 256 kB and the compressor are all that is held."""
    with (tmp_path / "fields.vtu").open("wb") as file:
        file.truncate(40_000_000)
    (tmp_path / "results.json").write_bytes(b"0123456789" * 400_000)
    tracemalloc.start()
    sent = sum(map(len, stream_archive(tmp_path)))
    _, peak = tracemalloc.get_traced_memory()
    tracemalloc.stop()
    assert sent > 40_000_000
    assert peak < 4_000_000


def test_the_fingerprint_changes_when_a_file_is_added(folder: Path) -> None:
    before = fingerprint(folder)
    assert fingerprint(folder) == before
    (folder / "fields" / "sway.vtu").write_bytes(b"new")
    assert fingerprint(folder) != before


def test_a_file_that_goes_away_ends_the_stream_with_an_error(folder: Path) -> None:
    pieces = stream_archive(folder)
    next(pieces)
    (folder / "tables" / "peaks.csv").unlink()
    with pytest.raises(FileNotFoundError):
        list(pieces)
