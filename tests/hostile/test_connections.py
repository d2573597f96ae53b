"""What clients do to a connection: slow ones, liars about lengths, and such as speak no HTTP.

Straight to gunicorn, without a proxy in front. Patience is for failing tests alone: a hang.
"""

import gzip
import json
import socket
import threading
import time
from collections.abc import Iterator
from contextlib import ExitStack, closing, contextmanager, suppress
from http.client import HTTPConnection
from pathlib import Path
from urllib.parse import urlsplit

import pytest

import api
from tests.hostile.conftest import Site
from tests.hostile.promises import keeps
from tests.hostile.site import PATIENCE, THREADS
from tests.job_documents import strip

pytestmark = pytest.mark.server

HANG = 60.0  # [s]
HERE = Path(api.__file__).parent.parent
DOCUMENT = json.dumps(strip()).encode()
POST = b"POST /v1/jobs HTTP/1.1\r\nHost: localhost\r\nContent-Type: application/json\r\n"
CLOSE = b"Connection: close\r\n"


@contextmanager
def connected(site: Site) -> Iterator[socket.socket]:
    where = urlsplit(site.url)
    with socket.create_connection((where.hostname, where.port), HANG) as found:
        yield found


def ask(site: Site, request: bytes) -> tuple[int, bytes]:
    """Status and body of the answer to raw bytes, which may be all that is ever sent."""
    with connected(site) as connection:
        connection.sendall(request)
        connection.shutdown(socket.SHUT_WR)
        answer = b""
        while piece := connection.recv(1 << 16):
            answer += piece
    head, _, body = answer.partition(b"\r\n\r\n")
    lines = head.decode("latin-1").split("\r\n")
    status = int(lines[0].split()[1])
    headers = dict(line.split(": ", 1) for line in lines[1:])
    keeps(status if status != 501 else 400, headers, body.replace(b": 501", b": 400")
          if status == 501 else body, (site.store, HERE))  # fmt: skip
    return status, body


def is_served(site: Site) -> None:
    """Another client gets its answer."""
    with closing(HTTPConnection(urlsplit(site.url).netloc, timeout=HANG)) as connection:
        connection.request("GET", "/health/live")
        assert connection.getresponse().status == 200


def test_others_are_served_beside_clients_that_never_finish_their_headers(site: Site) -> None:
    """Twice as many as there are threads, which wait for them only so long, letters or not."""
    with ExitStack() as slow:
        sockets = [slow.enter_context(connected(site)) for _ in range(2 * 2 * THREADS)]
        for number, connection in enumerate(sockets):
            connection.sendall(POST[: 5 + number % 60])
        is_served(site)
        with suppress(OSError):  # some have been told to go
            for connection in sockets:
                connection.sendall(b"x")
        is_served(site)


def test_a_client_that_is_too_slow_is_told_so(site: Site) -> None:
    with connected(site) as connection:
        connection.sendall(POST)
        answer = connection.recv(1 << 16)
    assert answer.startswith(b"HTTP/1.1 408 ")
    assert b'"cautions"' in answer


def test_a_body_that_is_sent_in_pieces_has_the_time_it_needs(site: Site) -> None:
    """Slower than at once, and faster than 10 kB/s, for longer than a request without body may."""
    body = b" " * 80_000 + DOCUMENT
    pieces = [body[i : i + 8000] for i in range(0, len(body), 8000)]
    with connected(site) as connection:
        connection.sendall(POST + CLOSE + b"Content-Length: %d\r\n\r\n" % len(body))
        for piece in pieces:
            time.sleep(1.3 * PATIENCE / len(pieces))
            connection.sendall(piece)
        answer = connection.recv(1 << 16)
    assert answer.startswith(b"HTTP/1.1 202 ")


def test_others_are_served_beside_clients_that_never_finish_their_bodies(site: Site) -> None:
    with ExitStack() as slow:
        for _ in range(2 * 2 * THREADS):
            connection = slow.enter_context(connected(site))
            connection.sendall(POST + b"Content-Length: 1000\r\n\r\n{")
        is_served(site)


def test_a_body_without_a_length_is_read_to_its_end(site: Site) -> None:
    pieces = b"".join(b"%x\r\n%s\r\n" % (len(p), p) for p in (DOCUMENT[:9], DOCUMENT[9:]))
    status, _ = ask(
        site, POST + CLOSE + b"Transfer-Encoding: chunked\r\n\r\n" + pieces + b"0\r\n\r\n"
    )
    assert status == 202


def test_a_body_without_a_length_is_refused_beyond_the_limit(site: Site) -> None:
    piece = b"%x\r\n%s\r\n" % (1 << 16, b" " * (1 << 16))
    head = POST + CLOSE + b"Transfer-Encoding: chunked\r\n\r\n"
    status, _ = ask(site, head + 3 * piece + b"0\r\n\r\n")
    assert status == 413


@pytest.mark.parametrize(
    ("headers", "body", "expected"),
    [
        (b"Content-Length: 5\r\n", DOCUMENT, {422}),  # five bytes are no document
        (b"Content-Length: %d\r\n" % (len(DOCUMENT) + 9), DOCUMENT, {400, 422}),
        (b"Content-Length: -1\r\n", DOCUMENT, {400}),
        (b"Content-Length: 1_0\r\n", DOCUMENT, {400}),
        (b"Content-Length: 99999999999999999999\r\n", DOCUMENT, {413}),
        (b"Content-Length: 5\r\nContent-Length: 6\r\n", DOCUMENT, {400}),
        (b"Content-Length: 5\r\nTransfer-Encoding: chunked\r\n", b"0\r\n\r\n", {400}),
        (b"Transfer-Encoding: gzip\r\n", DOCUMENT, {400, 501}),
        (b"Transfer-Encoding: chunked\r\n", b"zz\r\n", {400}),
        (b"Transfer-Encoding: chunked\r\n", b"5\r\n{", {400, 422}),
        (b"Transfer-Encoding: chunked\r\n", b"-5\r\n{", {400}),
        (b"X-A: 1\r\n folded\r\nContent-Length: 0\r\n", b"", {400}),
        (b"X-A : 1\r\nContent-Length: 0\r\n", b"", {400}),
        (b"X-\xe9: 1\r\nContent-Length: 0\r\n", b"", {400}),
        (b"X-A: " + b"x" * 10_000 + b"\r\nContent-Length: 0\r\n", b"", {431}),
        (b"X-A: 1\r\n" * 200 + b"Content-Length: 0\r\n", b"", {431}),
        (b"Expect: 200-maybe\r\nContent-Length: 0\r\n", b"", {417}),
    ],
)
def test_lies_about_the_body_are_refused(
    site: Site, headers: bytes, body: bytes, expected: set[int]
) -> None:
    """RFC 9112, section 6.3: a message whose length cannot be trusted is an error."""
    status, _ = ask(site, POST + CLOSE + headers + b"\r\n" + body)
    assert status in expected


@pytest.mark.parametrize(
    ("request_line", "expected"),
    [
        (b"GET /health/live HTTP/9.9", {400, 505}),
        (b"GET /health/live", {400}),
        (b"GET", {400}),
        (b"\x16\x03\x01\x02", {400}),  # TLS to a port without
        (b"get /health/live HTTP/1.1", {400, 405}),
        (b"BREW /health/live HTTP/1.1", {405}),
        (b"GET " + b"/a" * 5000 + b" HTTP/1.1", {414}),
        (b"GET http://elsewhere.example/health/live HTTP/1.1", {200, 400, 401, 404}),
        (b"GET /\x00 HTTP/1.1", {400, 404}),
        (b"GET //health//live HTTP/1.1", {308, 404}),
        (b"GET /v1/jobs/../../etc/passwd HTTP/1.1", {404}),
        (b"GET /v1/jobs/%2e%2e/%2e%2e/etc/passwd HTTP/1.1", {404}),
        (b"OPTIONS * HTTP/1.1", {200, 404}),
    ],
)
def test_requests_that_are_none_are_answered(
    site: Site, request_line: bytes, expected: set[int]
) -> None:
    status, _ = ask(site, request_line + b"\r\nHost: localhost\r\n" + CLOSE + b"\r\n")
    assert status in expected


def test_a_request_hidden_in_the_body_of_another_is_not_answered(site: Site) -> None:
    """Smuggling: of two lengths neither is believed, and what follows is thrown away."""
    hidden = b"GET /health/live HTTP/1.1\r\nHost: localhost\r\n\r\n"
    lengths = b"Content-Length: %d\r\nTransfer-Encoding: chunked\r\n\r\n" % (5 + len(hidden))
    status, body = ask(site, POST + lengths + b"0\r\n\r\n" + hidden)
    assert status == 400
    assert b"HTTP/1.1" not in body


@pytest.mark.parametrize("times", [1, 2])
def test_a_bomb_is_refused(site: Site, times: int) -> None:
    """A hundred megabytes of blanks in a hundred kilobytes, and that once more in a few hundred."""
    bomb = gzip.compress(b" " * 10**8, 9)
    for _ in range(times - 1):
        bomb = gzip.compress(bomb, 9)
    head = POST + CLOSE + b"Content-Encoding: gzip\r\nContent-Length: %d\r\n\r\n" % len(bomb)
    status, _ = ask(site, head + bomb)
    assert status == (413 if times == 1 else 422)


def test_a_client_that_leaves_while_it_is_answered_does_no_harm(site: Site) -> None:
    def leave() -> None:
        with connected(site) as connection:
            connection.sendall(b"GET /openapi.json HTTP/1.1\r\nHost: localhost\r\n\r\n")

    leaving = [threading.Thread(target=leave) for _ in range(20)]
    for thread in leaving:
        thread.start()
    for thread in leaving:
        thread.join()
    is_served(site)


def test_a_host_from_elsewhere_is_not_served(site: Site) -> None:
    """Without tokens: a page in a browser can give its own name to this machine (DNS rebinding)."""
    status, _ = ask(site, b"GET /v1/jobs HTTP/1.1\r\nHost: evil.example\r\n" + CLOSE + b"\r\n")
    assert status == 401
