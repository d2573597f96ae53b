"""File names for the names that clients give.

A case may be called "lift, tide +1.2 m" or "подъём"; what it is filed under must be one plain path
component on any file system, the same in every process, and never two names in one file.
"""

import hashlib
from urllib.parse import quote

SHEET = "sheet.html"
# With ".vtu" or a temporary suffix added, still below the 255 bytes that file systems allow.
LONGEST = 200


def file_name(name: str) -> str:
    """The path component for a name; differs whenever the names differ.

    Other characters than letters, digits and " ()+,=-_.#" are percent-encoded (UTF-8). What would
    be too long for a file system is cut and told apart by a digest behind a "~", which is
    percent-encoded in all other names.

    Raises
    ------
    ValueError   the name is empty.
    """
    if not name:
        raise ValueError("an empty name cannot be filed")
    encoded = quote(name, safe=" ()+,=-_.#").replace("~", "%7E")
    if encoded.startswith("."):  # neither hidden nor a way out of the folder
        encoded = "%2E" + encoded[1:]
    if len(encoded) <= LONGEST:
        return encoded
    digest = hashlib.sha256(name.encode()).hexdigest()[:16]
    return f"{encoded[: LONGEST - len(digest) - 1]}~{digest}"
