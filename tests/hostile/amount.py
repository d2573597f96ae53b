"""How much is thrown at the program: a sample in every build, all of it where that is asked for.

HOSTILE=10000 pytest tests/hostile -s      so many requests, documents and jobs of each kind
"""

import os

LONG = int(os.environ.get("HOSTILE", "0"))


def count(usual: int) -> int:
    """How many, where so many are usual."""
    return max(usual, LONG)
