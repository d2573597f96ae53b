"""The job documents that a command line names: files, and all `*.json` of folders."""

import os
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from pathlib import Path

import click
from click.shell_completion import CompletionItem

from api.commands.terminal import BAD_INPUT, leave

SUFFIX = ".json"


class DocumentPath(click.Path):
    """A file, or where `folders` says so a folder; a shell completes it to job documents."""

    def __init__(self, *, folders: bool = False) -> None:
        super().__init__(exists=True, dir_okay=folders, path_type=Path)

    def shell_complete(
        self, ctx: click.Context, param: click.Parameter, incomplete: str
    ) -> list[CompletionItem]:
        """Documents and folders that begin so; left to the shell where it knows better.

        The shell appends "/" to a lone folder and quotes odd names, which it does not do with what
        it is told.
        """
        names = sorted(_candidates(incomplete))
        if not any(name.endswith(SUFFIX) for name in names):
            return [CompletionItem(incomplete, type="dir")]
        if any(not _is_plain(name) for name in names):
            return [CompletionItem(incomplete, type="file")]
        return [CompletionItem(name) for name in names]


def _candidates(incomplete: str) -> Iterable[str]:
    before, start = os.path.split(incomplete)
    try:
        entries = list(os.scandir(before or "."))
    except OSError:
        return
    for entry in entries:
        if entry.name.startswith(start) and (start or not entry.name.startswith(".")):
            name = os.path.join(before, entry.name)  # noqa: PTH118 - as it was typed
            if entry.is_dir():
                yield name + "/"
            elif entry.name.endswith(SUFFIX):
                yield name


def _is_plain(name: str) -> bool:
    return all(c.isalnum() or c in "/._-+=@%" for c in name)


@dataclass(frozen=True)
class Document:
    """path : as it was given; name : short, and different from that of all others."""

    path: Path
    name: str


def gather(paths: Sequence[Path]) -> list[Document]:
    """Every document that the paths name, once, in their order; folders are not searched deeper.

    Ends the command where a folder holds none.
    """
    found: dict[Path, Path] = {}
    for path in paths:
        for document in _inside(path) if path.is_dir() else [path]:
            found.setdefault(document.resolve(), document)
    common = os.path.commonpath([path.parent for path in found])
    return [Document(given, _name(path.relative_to(common))) for path, given in found.items()]


def _name(path: Path) -> str:
    return (path.with_suffix("") if path.suffix == SUFFIX else path).as_posix()


def _inside(folder: Path) -> list[Path]:
    documents = sorted(path for path in folder.glob(f"*{SUFFIX}") if path.is_file())
    if not documents:
        leave(BAD_INPUT, f"{folder} holds no job document (*{SUFFIX}).")
    return documents


def is_single(paths: Sequence[Path]) -> bool:
    """Whether one document was named, not a set of them."""
    return len(paths) == 1 and not paths[0].is_dir()


def result_folders(documents: Sequence[Document], out: Path | None) -> dict[Document, Path]:
    """A folder of its own for each document: below `out`, or beside the document.

    Ends the command where two would share one, or one would lie in another.
    """
    folders = {
        document: beside(document.path) if out is None else out / document.name
        for document in documents
    }
    taken: set[Path] = set()
    for document, folder in folders.items():
        if folder in taken or not set(folders.values()).isdisjoint(folder.parents):
            leave(
                BAD_INPUT,
                f"The results of {document.path} would lie among those of another document; "
                "name them in two commands.",
            )
        taken.add(folder)
    return folders


def beside(document: Path) -> Path:
    """Where the results of a document go when nothing is said."""
    return document.with_name(f"{document.stem}-results")
