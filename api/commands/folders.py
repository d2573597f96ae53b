"""The folder that results or a check are written to: a whole new one, or the old one untouched."""

import shutil
import tempfile
from collections.abc import Iterator
from collections.abc import Set as AbstractSet
from contextlib import contextmanager
from pathlib import Path

from rich.markup import escape

from api.commands.terminal import BAD_INPUT, err, leave

RESULTS = "results.json"
# What a person opens first, and why.
FIRST = {"sheet.html": "  the review sheet: read it, print it, file it",
         "check.json": "  everything that was understood"}  # fmt: skip
# All that results ever consist of, see `workers/pipeline.py`.
OURS = {RESULTS, "job.json", "displacements.npy", "fields", "previews", "lines", "envelope",
        "envelope.npz", "mesh.npz", "tables", "sheet.html", "convergence.png"}  # fmt: skip
OF_A_CHECK = {"check.json", "previews"}  # see `workers/checking.py`


def refuse_foreign(
    folder: Path, ours: AbstractSet[str] = OURS, earlier: str = "earlier results"
) -> None:
    """Results replace earlier results only, never a folder with something else in it."""
    foreign = sorted({path.name for path in folder.iterdir()} - ours) if folder.exists() else []
    if foreign:
        leave(
            BAD_INPUT,
            f"{folder} holds something else than {earlier} ({foreign[0]}); choose another.",
        )


@contextmanager
def replaced(folder: Path) -> Iterator[Path]:
    """An empty folder to write to, which takes the place of `folder` when all went well."""
    folder.parent.mkdir(parents=True, exist_ok=True)
    with tempfile.TemporaryDirectory(dir=folder.parent, prefix=".fishplate-") as scratch:
        fresh = Path(scratch, "results")
        fresh.mkdir()
        yield fresh
        if folder.exists():
            shutil.rmtree(folder)
        fresh.rename(folder)


def name_files(folder: Path) -> None:
    """Say what there is now: first what a person reads."""
    console = err()
    console.print(f"Written to {escape(str(folder))}:", soft_wrap=True)
    entries = sorted(folder.iterdir(), key=lambda path: (path.name not in FIRST, path.name))
    for path in entries:
        if path.is_dir():
            count = sum(inner.is_file() for inner in path.rglob("*"))
            what = f"{path.name}/  ({count} file{'s' if count != 1 else ''})"
        else:
            what = f"{path.name}{FIRST.get(path.name, '')}"
        console.print(f"  {escape(what)}", soft_wrap=True)
