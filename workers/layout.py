"""How a store is laid out: its version, and who is at work on it.

    layout.json    {"layout": 1, "by": "fishplate 0.1.0", "since": "..."}
    in-use.lock    held together by every server and every pool that is at work on the store
    restoring      there while a back-up is being restored (restore.py)

A program refuses a store of another layout and changes nothing in it. A store without jobs has no
layout yet: whoever files the first job, or begins to work, writes that of the program. A store with
jobs and without `layout.json` is of layout 0, from before there was this file.
"""

from collections.abc import Iterator
from contextlib import ExitStack, contextmanager
from importlib.metadata import version
from pathlib import Path

import orjson

from workers import durable
from workers.errors import LayoutError
from workers.record import new_id, now
from workers.store_reader import telling

LAYOUT = 1  # of this program; a change of it comes with a step in migrations.py
FILE = "layout.json"
IN_USE = "in-use.lock"
RESTORING = "restoring"


def layout_of(root: Path) -> int | None:
    """The layout of a store; None where it has no jobs and none was written.

    Raises
    ------
    LayoutError   `layout.json` is damaged, or the store is half restored.
    """
    with telling(f"the layout of the store {root} could not be read"):
        if (root / RESTORING).exists():
            raise LayoutError(
                f"a back-up is being restored into {root}, or was interrupted: repeat "
                "`fishplate restore`, or begin with an empty folder"
            )
        try:
            layout = orjson.loads((root / FILE).read_bytes())["layout"]
        except FileNotFoundError:
            jobs = root / "jobs"
            return 0 if jobs.is_dir() and any(jobs.iterdir()) else None
        except (ValueError, TypeError, LookupError):
            layout = None
    if not isinstance(layout, int) or layout < 0:
        raise LayoutError(
            f'{root / FILE} is damaged; it should hold {{"layout": {LAYOUT}}}, or the layout of '
            "the Fishplate that wrote the store"
        )
    return layout


def require(root: Path) -> None:
    """Refuse a store that is not laid out as this program expects. Changes nothing.

    Raises
    ------
    LayoutError   with what to do.
    """
    layout = layout_of(root)
    if layout is None or layout == LAYOUT:
        return
    here = f"the store {root} has layout {layout}, and fishplate {version('fishplate')}"
    if layout > LAYOUT:
        raise LayoutError(
            f"{here} knows none above {LAYOUT}: a newer Fishplate has written it. Install that "
            "one, or restore a back-up from before"
        )
    raise LayoutError(
        f"{here} works with layout {LAYOUT}. Stop every Fishplate that uses the store, make a "
        "back-up (`fishplate backup`), then run `fishplate migrate`"
    )


def stamp(root: Path, layout: int = LAYOUT) -> None:
    """Write down, durably, which layout the store has."""
    about = {"layout": layout, "by": f"fishplate {version('fishplate')}", "since": now()}
    durable.make_folder(root)
    # Several may write it at a time, all the same: each beside it, under a name of its own.
    scratch = root / f".layout-{new_id()}"
    try:
        durable.write(scratch, orjson.dumps(about, option=orjson.OPT_APPEND_NEWLINE))
        scratch.replace(root / FILE)
    except OSError:
        scratch.unlink(missing_ok=True)
        raise
    durable.sync_folder(root)


@contextmanager
def in_use(root: Path) -> Iterator[None]:
    """Be one of those at work on a store, whose layout nobody changes meanwhile.

    Raises
    ------
    LayoutError   the store has another layout, or its layout is being changed.
    """
    with _together(root):
        require(root)
        if layout_of(root) is None:
            with telling(f"the store {root} could not be written"):
                stamp(root)
        yield


@contextmanager
def unchanged(root: Path) -> Iterator[None]:
    """Look into a store, of this layout or an older one, while nobody changes its layout.

    Raises
    ------
    LayoutError   the store has a newer layout, or its layout is being changed.
    """
    with _together(root):
        if (layout_of(root) or 0) > LAYOUT:
            require(root)
        yield


@contextmanager
def alone(root: Path, why: str) -> Iterator[None]:
    """Be the only one at work on a store, for as long as its layout changes.

    Raises
    ------
    LayoutError   a server or a pool is at work on it, on whichever machine.
    """
    with _opened(root, shared=False) as mine:
        if not mine:
            raise LayoutError(
                f"the store {root} is in use, so it cannot be {why}: stop `fishplate serve` and "
                "`fishplate work` on every machine that shares it"
            )
        yield


@contextmanager
def _together(root: Path) -> Iterator[None]:
    with _opened(root, shared=True) as mine:
        if not mine:
            raise LayoutError(f"the store {root} is being migrated or restored; try again later")
        yield


@contextmanager
def _opened(root: Path, *, shared: bool) -> Iterator[bool]:
    with ExitStack() as held:
        with telling(f"the store {root} could not be opened"):
            durable.make_folder(root)
            mine = held.enter_context(durable.lock(root / IN_USE, wait=False, shared=shared))
        yield mine
