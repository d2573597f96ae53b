"""What the operator may set: every name, default, meaning and check, in one place.

Read once from the environment. The settings travel between processes as environment variables too
(`as_environment`), so a child process sees exactly what its parent saw.
"""

import os
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field, fields
from pathlib import Path
from typing import Any

from workers import setting_readers as readers
from workers.errors import SettingsError

PREFIX = "FISHPLATE_"
# Variables with our prefix that are no settings of a server: what a client sends as its token.
CLIENT_VARIABLES = frozenset({"token"})
GIBIBYTE = 1024**3


def default_store() -> Path:
    """Where jobs are kept when nothing is said: the user's data folder (XDG base directories)."""
    data = os.environ.get("XDG_DATA_HOME") or Path.home() / ".local" / "share"
    return Path(data) / "fishplate"


def default_workers() -> int:
    """One worker for each processor that this process may use."""
    return len(os.sched_getaffinity(0))


def default_memory_limit() -> int:
    """Three quarters of the machine's memory, shared by the default number of workers [bytes]."""
    physical = os.sysconf("SC_PAGE_SIZE") * os.sysconf("SC_PHYS_PAGES")
    return physical * 3 // 4 // default_workers()


def _setting(
    default: Any, read: Callable[[str], Any], meaning: str, *, default_text: str | None = None
) -> Any:
    """A setting. default_text: how a default that depends on the machine is described."""
    metadata = {"read": read, "meaning": meaning, "default_text": default_text}
    if callable(default):
        return field(default_factory=default, metadata=metadata)
    return field(default=default, metadata=metadata)


@dataclass(frozen=True)
class Settings:
    """All settings of one installation. The environment variable is FISHPLATE_ and the name."""

    # --- where -----------------------------------------------------------------------------------
    store: Path = _setting(
        default_store,
        readers.path,
        "Folder of all jobs; shared by every machine that works on them.",
        default_text="~/.local/share/fishplate",
    )
    redis_url: str | None = _setting(
        None,
        readers.redis_url,
        "Redis server, e.g. `redis://host:6379/0` or `unix:///path/redis.sock`. Without it a "
        "private server is started, whose files are in the store.",
    )
    host: str = _setting(
        "127.0.0.1",
        str,
        "Address to listen on. Beyond this machine only when tokens have been made.",
    )
    port: int = _setting(8470, readers.whole(0, 65535), "Port to listen on; 0 is any free one.")
    proxies: int = _setting(
        0,
        readers.whole(0, 10),
        "Reverse proxies in front of the server whose `X-Forwarded-` headers are believed.",
    )

    # --- how much at a time ----------------------------------------------------------------------
    workers: int = _setting(
        default_workers,
        readers.whole(0, 1024),
        "Jobs worked on at a time on this machine; 0 has `fishplate serve` answer requests only, "
        "for workers that run elsewhere (`fishplate work`).",
        default_text="one for each processor",
    )
    api_threads: int = _setting(
        16, readers.whole(2, 1024), "Requests that each process of the API answers at a time."
    )
    client_patience: float = _setting(
        20.0,
        readers.seconds,
        "How long a request may take to come in [s]; a body may take a second more for every 10 kB "
        "of it.",
    )
    longest_wait: int = _setting(
        60, readers.whole(1, 3600), "Longest wait that `Prefer: wait=` is granted [s]."
    )
    pictures: int = _setting(
        6,
        readers.whole(0, 1000),
        "Pictures drawn with the job; further ones are drawn when asked for.",
    )

    # --- limits of one job -----------------------------------------------------------------------
    body_bytes: int = _setting(
        GIBIBYTE // 4, readers.size, "Largest job document, after decompression [bytes]."
    )
    most_levels: int = _setting(
        32,
        readers.whole(8, 1000),
        "Levels of objects and lists within each other in a document; jobs have up to seven.",
    )
    most_nodes: int = _setting(
        2_000_000,
        readers.whole(1, 10**9),
        "Nodes that a document may bring as its own mesh, or ask for by patches.",
    )
    most_cases: int = _setting(
        5_000, readers.whole(1, 10**6), "Load cases and combinations of one job, together."
    )
    most_dofs: int = _setting(
        4_000_000,
        readers.whole(1, 10**9),
        "Degrees of freedom of one job, two for each node, whatever made the mesh.",
    )
    time_limit: int = _setting(900, readers.whole(1, 604_800), "Longest run of one job [s].")
    memory_limit: int = _setting(
        default_memory_limit,
        readers.size,
        "Memory of one job beyond the resting worker [bytes]; `4GiB` is understood.",
        default_text="three quarters of the machine's, shared by its processors",
    )

    large_jobs: str = _setting(
        "refuse",
        readers.one_of("refuse", "iterate"),
        "What becomes of a job whose factor would not fit the memory of one job: `refuse` answers "
        "413, `iterate` solves it by conjugate gradients, with half the memory and a hundred times "
        "the time for each load case.",
    )

    # --- limits of one client --------------------------------------------------------------------
    queue_length: int = _setting(
        5_000,
        readers.whole(1, 10**6),
        "Unfinished jobs of one workspace; further ones are answered with 429.",
    )
    interactive_jobs: int = _setting(
        8,
        readers.whole(0, 10**6),
        "Unfinished jobs of one token that may stand in the interactive line; further ones are put "
        "into the bulk line.",
    )
    request_rate: str = _setting(
        "3000/minute",
        readers.rate,
        "Requests with one token, or from one address without one; or off.",
    )
    submit_rate: str = _setting(
        "1200/minute", readers.rate, "Jobs submitted with one token, and checks likewise; or off."
    )

    # --- keeping ---------------------------------------------------------------------------------
    keep_days: float | None = _setting(
        None,
        readers.days,
        "Final jobs are removed so many days after their end, unless pinned. Without it none is "
        "removed for its age: they are evidence.",
    )
    keep_bytes: int | None = _setting(
        None,
        readers.size,
        "While the store holds more, the oldest final jobs are removed, unless pinned. Without it "
        "none is removed for its size.",
    )
    housekeeping_every: float = _setting(
        300.0,
        readers.seconds,
        "Time between two looks at the size of the store and at what is to be removed [s].",
    )

    # --- keeping going ---------------------------------------------------------------------------
    reconcile_every: float = _setting(
        15.0,
        readers.seconds,
        "Time between two looks for jobs that Redis lost or whose worker died [s].",
    )
    shutdown_grace: float = _setting(
        30.0,
        readers.seconds,
        "How long a stopping pool lets running jobs go on [s]; then they are queued again.",
    )
    log_level: str = _setting(
        "info",
        readers.one_of("debug", "info", "warning", "error"),
        "Least important log entries that are written; `info` has a line for each request.",
    )

    @classmethod
    def from_environment(cls, environment: Mapping[str, str] | None = None) -> "Settings":
        """Read the variables that begin with FISHPLATE_.

        Raises
        ------
        SettingsError   a value is wrong, or a name is not known (a misspelt limit must not pass).
        """
        environment = os.environ if environment is None else environment
        given = {
            name.removeprefix(PREFIX).lower(): text
            for name, text in environment.items()
            if name.startswith(PREFIX)
        }
        known = {setting.name: setting.metadata["read"] for setting in fields(cls)}
        unknown = sorted(given.keys() - known.keys() - CLIENT_VARIABLES)
        if unknown:
            raise SettingsError(
                f"unknown setting {', '.join(map(variable, unknown))}; known: "
                + ", ".join(map(variable, known))
            )
        return cls(
            **{n: _read(n, text, known[n]) for n, text in given.items() if text and n in known}
        )

    def as_environment(self) -> dict[str, str]:
        """The variables from which `from_environment` makes these settings again."""
        values = {f.name: getattr(self, f.name) for f in fields(self)}
        return {variable(n): str(v) for n, v in values.items() if v is not None}


def variable(name: str) -> str:
    """The environment variable of a setting."""
    return PREFIX + name.upper()


def _read(name: str, text: str, reader: Callable[[str], Any]) -> Any:
    try:
        return reader(text)
    except ValueError as error:
        raise SettingsError(f"{variable(name)}={text!r}: {error}") from error
