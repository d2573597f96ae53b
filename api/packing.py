"""Answers packed with gzip for clients that ask for it: what is text, and long enough to gain.

Files are packed while they are sent, so that a large one never is in memory as a whole. Pictures
and VTK files are packed already; parts of files (Range) are parts of what is on the disk.
"""

import gzip
import zlib
from collections.abc import Iterable, Iterator

import flask
from flask import Flask, Response

PACKED = frozenset({"application/json", "application/problem+json", "text/csv", "text/html",
                    "text/plain"})  # fmt: skip
WORTH_PACKING = 1024  # bytes; below, an answer fits into one or two packets anyway
LEVEL = 1  # numbers become little smaller with more, and it takes several times as long
GZIP_WINDOW = 16 + zlib.MAX_WBITS  # zlib's way to say: gzip header and trailer


def register(app: Flask) -> None:
    """Pack what the application answers."""
    app.after_request(pack)


def pack(answer: Response) -> Response:
    """The answer, packed if that helps and the client wants it."""
    if answer.mimetype not in PACKED and answer.status_code != 304:
        return answer
    answer.vary.add("Accept-Encoding")
    if not _helps(answer):
        return answer
    if answer.is_streamed:
        _pack_stream(answer)
    else:
        answer.set_data(gzip.compress(answer.get_data(), compresslevel=LEVEL))
    answer.headers["Content-Encoding"] = "gzip"
    answer.headers.pop("Accept-Ranges", None)
    etag, weak = answer.get_etag()
    if etag and not weak:
        # Byte for byte it is another file, but it says the same (RFC 9110, section 8.8.1).
        answer.set_etag(etag, weak=True)
    return answer


def _helps(answer: Response) -> bool:
    size = answer.content_length
    if size is None and not answer.is_streamed:
        size = answer.calculate_content_length()
    return (
        flask.request.method != "HEAD"
        and answer.status_code not in (206, 304)
        and "Content-Encoding" not in answer.headers
        and (size is None or size >= WORTH_PACKING)
        and flask.request.accept_encodings["gzip"] > 0
    )


def _pack_stream(answer: Response) -> None:
    """Put a packer between the body and the client."""
    body = answer.response
    if close := getattr(body, "close", None):
        answer.call_on_close(close)
    answer.direct_passthrough = False
    answer.response = _packed(body)  # type: ignore[arg-type]
    answer.headers.pop("Content-Length", None)


def _packed(pieces: Iterable[bytes]) -> Iterator[bytes]:
    packer = zlib.compressobj(LEVEL, zlib.DEFLATED, GZIP_WINDOW)
    for piece in pieces:
        if packed := packer.compress(piece):
            yield packed
    yield packer.flush()
