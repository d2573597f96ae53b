"""What the operator may set: every name, default and check, read once from the environment.

The settings travel between processes as environment variables too (`as_environment`), so a child
process sees exactly what its parent saw.
"""

import os
import re
from collections.abc import Callable, Mapping
from dataclasses import dataclass, field, fields
from pathlib import Path
from typing import Any

from workers.errors import SettingsError

PREFIX = "FISHPLATE_"
GIBIBYTE = 1024**3
_SIZE = re.compile(r"(\d+)\s*(?:(K|M|G|T)iB|B)?", re.ASCII)
_SIZE_POWER = {None: 0, "K": 1, "M": 2, "G": 3, "T": 4}


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


@dataclass(frozen=True)
class Settings:
    """All settings of one installation. The environment variable is FISHPLATE_ and the name.

    store           folder of all jobs; shared by every machine that works on them
    redis_url       e.g. "redis://host:6379/0" or "unix:///path/redis.sock"; None: a private server
    workers         jobs worked on at a time on this machine
    host, port      where the API listens; port 0 is any free one
    api_threads     requests that the API answers at a time
    body_bytes      largest job document [bytes]; "64MiB" is understood
    time_limit      longest run of one job [s]
    memory_limit    memory of one job beyond the resting worker [bytes]; "4GiB" is understood
    longest_wait    longest wait that `Prefer: wait=` is granted [s]
    pictures        pictures drawn with the job; further ones are drawn when asked for
    reconcile_every time between two looks for jobs that Redis lost or whose worker died [s]
    shutdown_grace  how long a stopping pool lets running jobs go on [s]; then they are re-queued
    """

    store: Path = field(default_factory=default_store)
    redis_url: str | None = None
    workers: int = field(default_factory=default_workers)
    host: str = "127.0.0.1"
    port: int = 8470
    api_threads: int = 16
    body_bytes: int = GIBIBYTE // 4
    time_limit: int = 900
    memory_limit: int = field(default_factory=default_memory_limit)
    longest_wait: int = 60
    pictures: int = 6
    reconcile_every: float = 15.0
    shutdown_grace: float = 30.0

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
        unknown = sorted(given.keys() - _READERS.keys())
        if unknown:
            raise SettingsError(
                f"unknown setting {', '.join(PREFIX + name.upper() for name in unknown)}; known: "
                + ", ".join(PREFIX + name.upper() for name in _READERS)
            )
        return cls(**{name: _read(name, text) for name, text in given.items() if text})

    def as_environment(self) -> dict[str, str]:
        """The variables from which `from_environment` makes these settings again."""
        values = {f.name: getattr(self, f.name) for f in fields(self)}
        return {PREFIX + n.upper(): str(v) for n, v in values.items() if v is not None}


def _read(name: str, text: str) -> Any:
    try:
        return _READERS[name](text)
    except ValueError as error:
        raise SettingsError(f"{PREFIX}{name.upper()}={text!r}: {error}") from error


def _path(text: str) -> Path:
    return Path(text).expanduser().absolute()


def _size(text: str) -> int:
    match = _SIZE.fullmatch(text.strip())
    if not match or int(match[1]) == 0:
        raise ValueError('a number of bytes above zero is needed, e.g. "64MiB" or "4GiB"')
    return int(match[1]) * 1024 ** _SIZE_POWER[match[2]]


def _whole(low: int, high: int) -> Callable[[str], int]:
    def read(text: str) -> int:
        if not text.strip().isdecimal() or not low <= int(text) <= high:
            raise ValueError(f"a whole number from {low} to {high} is needed")
        return int(text)

    return read


def _seconds(text: str) -> float:
    value = float(text)
    if not 0.0 < value < 1e6:
        raise ValueError("a number of seconds above zero is needed")
    return value


def _redis_url(text: str) -> str:
    if not text.startswith(("redis://", "rediss://", "unix://")):
        raise ValueError("a redis://, rediss:// or unix:// address is needed")
    return text


_READERS: dict[str, Callable[[str], Any]] = {
    "store": _path,
    "redis_url": _redis_url,
    "workers": _whole(1, 1024),
    "host": str,
    "port": _whole(0, 65535),
    "api_threads": _whole(2, 1024),
    "body_bytes": _size,
    "time_limit": _whole(1, 604_800),
    "memory_limit": _size,
    "longest_wait": _whole(1, 3600),
    "pictures": _whole(0, 1000),
    "reconcile_every": _seconds,
    "shutdown_grace": _seconds,
}
