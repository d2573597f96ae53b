"""How the text of an environment variable is read: one small reader for each kind of value.

A reader raises ValueError in words that say what is allowed; `settings.py` adds the name.
"""

import re
from collections.abc import Callable
from pathlib import Path

_SIZE = re.compile(r"(\d+)\s*(?:(K|M|G|T)iB|B)?", re.ASCII)
_SIZE_POWER = {None: 0, "K": 1, "M": 2, "G": 3, "T": 4}
_RATE = re.compile(r"[1-9]\d{0,8}/(second|minute|hour)", re.ASCII)
OFF = "off"


def path(text: str) -> Path:
    return Path(text).expanduser().absolute()


def size(text: str) -> int:
    """Bytes; Ki, Mi, Gi, Ti are powers of 1024 (IEC 80000-13)."""
    match = _SIZE.fullmatch(text.strip())
    if not match or int(match[1]) == 0:
        raise ValueError('a number of bytes above zero is needed, e.g. "64MiB" or "4GiB"')
    return int(match[1]) * 1024 ** _SIZE_POWER[match[2]]


def whole(low: int, high: int) -> Callable[[str], int]:
    def read(text: str) -> int:
        if not text.strip().isdecimal() or not low <= int(text) <= high:
            raise ValueError(f"a whole number from {low} to {high} is needed")
        return int(text)

    return read


def seconds(text: str) -> float:
    value = float(text)
    if not 0.0 < value < 1e6:
        raise ValueError("a number of seconds above zero is needed")
    return value


def days(text: str) -> float:
    value = float(text)
    if not 0.0 < value < 1e5:
        raise ValueError("a number of days above zero is needed")
    return value


def rate(text: str) -> str:
    if text != OFF and not _RATE.fullmatch(text):
        raise ValueError('a rate is needed, e.g. "100/minute", "5/second" or "off"')
    return text


def one_of(*words: str) -> Callable[[str], str]:
    def read(text: str) -> str:
        if text.lower() not in words:
            raise ValueError(f"one of {', '.join(words)} is needed")
        return text.lower()

    return read


def redis_url(text: str) -> str:
    if not text.startswith(("redis://", "rediss://", "unix://")):
        raise ValueError("a redis://, rediss:// or unix:// address is needed")
    return text
