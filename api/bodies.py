"""Reading a request body: its media type, its encoding, and how large it may grow.

What the bytes mean is for `workers/document/`.
"""

import zlib

from flask import Request
from werkzeug.exceptions import BadRequest

from api.problem_types import BODY_TOO_LARGE, MEDIA_TYPE_UNKNOWN
from api.problems import RefusalError

CHUNK = 1 << 16
GZIP_WINDOW = 16 + zlib.MAX_WBITS  # zlib's way to say: gzip header and trailer


def read_document_bytes(request: Request, limit: int) -> bytes:
    """The JSON document in the body, decompressed.

    limit : bytes that the document may have. Flask is told to read one byte more at most: of a
        body without Content-Length it hands over what fits, and says nothing of the rest.
    """
    if request.mimetype != "application/json":
        seen = request.mimetype or "no Content-Type"
        raise RefusalError(
            MEDIA_TYPE_UNKNOWN,
            f"{seen} was sent; a job document is application/json.",
            headers={"Accept": "application/json"},
        )
    encoding = request.headers.get("Content-Encoding", "identity").strip().lower()
    if encoding in ("identity", "gzip"):
        body = request.get_data(cache=False)
        announced = request.content_length
        if announced is not None and len(body) < min(announced, limit):
            # A document that is whole by chance would be accepted otherwise.
            raise BadRequest(f"The body ended after {len(body)} of {announced} bytes.")
        if len(body) > limit:
            raise RefusalError(BODY_TOO_LARGE, f"The body has more than the {limit} bytes allowed.")
        return gunzip(body, limit) if encoding == "gzip" else body
    raise RefusalError(
        MEDIA_TYPE_UNKNOWN,
        f"Content-Encoding {encoding} is not understood; send gzip or nothing.",
        headers={"Accept-Encoding": "gzip, identity"},
    )


def gunzip(data: bytes, limit: int) -> bytes:
    """Decompress without ever holding more than `limit` bytes of the result."""
    unpacker = zlib.decompressobj(GZIP_WINDOW)
    pieces: list[bytes] = []
    size = taken = 0
    waiting = b""
    try:
        while not unpacker.eof and (waiting or taken < len(data)):
            # By the piece: what is not yet unpacked is copied at each call.
            if not waiting:
                waiting, taken = data[taken : taken + CHUNK], taken + CHUNK
            piece = unpacker.decompress(waiting, min(CHUNK, limit - size + 1))
            waiting = unpacker.unconsumed_tail
            size += len(piece)
            if size > limit:
                raise RefusalError(
                    BODY_TOO_LARGE, f"The document unpacks to more than the {limit} bytes allowed."
                )
            pieces.append(piece)
    except zlib.error as error:
        raise RefusalError(MEDIA_TYPE_UNKNOWN, f"The body is not gzip data: {error}.") from error
    if not unpacker.eof or unpacker.unused_data or taken < len(data):
        raise RefusalError(
            MEDIA_TYPE_UNKNOWN, "The gzip data is cut short or followed by something."
        )
    return b"".join(pieces)
