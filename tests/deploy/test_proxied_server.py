"""Server, workers, Redis and proxy as deploy/hosting has them, each a process of its own."""

import gzip
import json
import os
import random
import shutil
import socket
import ssl
import subprocess
import time
from collections.abc import Callable, Iterator
from contextlib import ExitStack, contextmanager
from dataclasses import dataclass
from http.client import HTTPResponse, HTTPSConnection
from pathlib import Path
from typing import Any

import pytest
import redis

from tests.job_documents import strip
from tests.real_server import FISHPLATE, PATIENCE
from workers.tokens import Tokens

# Debian has it where ordinary users do not look.
NGINX = shutil.which("nginx", path=f"{os.environ['PATH']}:/usr/sbin")
pytestmark = [
    pytest.mark.server,
    pytest.mark.skipif(NGINX is None, reason="no nginx here"),
]

HOSTING = Path(__file__).resolve().parent.parent.parent / "deploy" / "hosting"
PASSWORD = "only for this test"
# Around the file that an installation has in /etc/nginx/conf.d.
AROUND = """
daemon off; worker_processes 1; pid {folder}/nginx.pid; error_log stderr;
events {{}}
http {{
    access_log off; client_body_temp_path {folder}/body; proxy_temp_path {folder}/proxy;
    fastcgi_temp_path {folder}/f; uwsgi_temp_path {folder}/u; scgi_temp_path {folder}/s;
    include {folder}/fishplate.conf;
}}
"""


@dataclass(frozen=True)
class Office:
    port: int
    trust: ssl.SSLContext
    token: str
    log: Path
    redis_url: str
    stop_api: Callable[[], None]

    def ask(self, method: str, path: str, body: bytes | None = None, **headers: str) -> Any:
        """Status, headers and body of the answer."""
        named = {name.replace("_", "-"): value for name, value in headers.items()}
        named.setdefault("Authorization", f"Bearer {self.token}")
        connection = HTTPSConnection("localhost", self.port, timeout=PATIENCE, context=self.trust)
        try:
            connection.request(method, path, body, named)
            answer: HTTPResponse = connection.getresponse()
            return answer.status, answer.headers, answer.read()
        finally:
            connection.close()


def free_port() -> int:
    """A port below those that the kernel hands out, so that nobody else is given it meanwhile."""
    while True:
        port = random.randrange(12_000, 32_000)
        with socket.socket() as attempt:
            try:
                attempt.bind(("127.0.0.1", port))
                return port
            except OSError:
                continue


@contextmanager
def running(
    log: Path, *command: str | Path, **environment: str
) -> Iterator["subprocess.Popen[bytes]"]:
    with log.open("ab") as output:
        process = subprocess.Popen(
            command, env={**os.environ, **environment}, stdout=output, stderr=output
        )
    try:
        yield process
    finally:
        process.terminate()
        process.wait(PATIENCE)


def written(folder: Path, name: str, *changes: tuple[str, str]) -> Path:
    """A file of deploy/hosting with places and ports of the test; each must be there."""
    text = (HOSTING / name).read_text()
    for old, new in changes:
        assert old in text
        text = text.replace(old, new)
    path = folder / name
    path.write_text(text)
    return path


def eventually(what: Callable[[], Any]) -> Any:
    until = time.monotonic() + PATIENCE
    while True:
        try:
            if found := what():
                return found
        except (OSError, redis.RedisError):
            pass
        assert time.monotonic() < until
        time.sleep(0.1)


def make_certificate(folder: Path) -> None:
    subprocess.run(
        ["openssl", "req", "-x509", "-newkey", "rsa:2048", "-nodes", "-days", "2", "-subj",
         "/CN=localhost", "-addext", "subjectAltName=DNS:localhost", "-keyout",
         folder / "fishplate.key", "-out", folder / "fishplate.crt"],
        check=True, capture_output=True,
    )  # fmt: skip


@pytest.fixture(scope="module")
def office(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Office]:
    folder = tmp_path_factory.mktemp("office")
    queue, api, proxy = free_port(), free_port(), free_port()
    (folder / "password.conf").write_text(f'requirepass "{PASSWORD}"\n')
    (folder / "redis").mkdir()
    make_certificate(folder)
    written(
        folder, "redis.conf", ("port 6380", f"port {queue}"), ("/var/lib/redis", f"{folder}/redis"),
        ("/etc/redis/fishplate-password.conf", f"{folder}/password.conf"),
    )  # fmt: skip
    written(
        folder, "nginx.conf", ("127.0.0.1:8470", f"127.0.0.1:{api}"), ("listen [::]:443 ssl;", ""),
        ("listen 443", f"listen 127.0.0.1:{proxy}"), ("/etc/nginx/", f"{folder}/"),
    ).rename(folder / "fishplate.conf")  # fmt: skip
    (folder / "around.conf").write_text(AROUND.format(folder=folder))
    store = folder / "store"
    token = Tokens(store).add("ana", "submit", "dock")[1]
    settings = {
        "FISHPLATE_STORE": str(store), "FISHPLATE_PICTURES": "0", "FISHPLATE_PROXIES": "1",
        "FISHPLATE_REDIS_URL": f"redis://:{PASSWORD.replace(' ', '%20')}@127.0.0.1:{queue}/0",
    }  # fmt: skip
    with ExitStack() as parts:
        for name, command in {
            "redis": ("redis-server", folder / "redis.conf"),
            "workers": (FISHPLATE, "work", "--workers", "1"),
            "nginx": (str(NGINX), "-e", "stderr", "-c", folder / "around.conf"),
        }.items():
            parts.enter_context(running(folder / f"{name}.log", *command, **settings))
        server = parts.enter_context(ExitStack())
        server.enter_context(
            running(
                folder / "api.log", FISHPLATE, "serve", "--workers", "0", "--port", str(api),
                **settings,
            )
        )  # fmt: skip
        trust = ssl.create_default_context(cafile=str(folder / "fishplate.crt"))
        office = Office(
            proxy, trust, token, folder / "api.log", settings["FISHPLATE_REDIS_URL"], server.close
        )
        try:
            eventually(lambda: office.ask("GET", "/health/ready")[0] == 200)
        except AssertionError as error:
            logs = "\n".join(f"{log}: {log.read_text()[-2000:]}" for log in folder.glob("*.log"))
            raise AssertionError(logs) from error
        yield office


def submitted(office: Office, document: Any, **headers: str) -> str:
    status, answer, _ = office.ask(
        "POST", "/v1/jobs", document, Content_Type="application/json", **headers
    )
    assert status == 202
    return str(answer["Location"])


def finished(office: Office, address: str) -> None:
    def ended() -> bool:
        job = json.loads(office.ask("GET", address, Prefer="wait=30")[2])
        assert job["state"] in ("queued", "running", "finished"), job
        return bool(job["state"] == "finished")

    eventually(ended)


def test_redis_asks_for_a_password_and_never_drops_what_waits(office: Office) -> None:
    with redis.Redis.from_url(office.redis_url) as client:
        found = client.config_get("maxmemory-policy", "appendonly", "appendfsync", "maxmemory")
        port = client.connection_pool.connection_kwargs["port"]
    assert found == {
        "maxmemory-policy": "noeviction", "appendonly": "yes", "appendfsync": "everysec",
        "maxmemory": str(256 * 1024**2),
    }  # fmt: skip
    with redis.Redis(port=port) as stranger, pytest.raises(redis.AuthenticationError):
        stranger.ping()


def test_a_packed_document_goes_through_and_ranges_of_a_file_come_back(office: Office) -> None:
    """The strip: 32000 N / (40 mm x 8 mm) = 100 MPa; Q8 has it exactly."""
    document = gzip.compress(json.dumps(strip()).encode())
    address = submitted(office, document, Content_Encoding="gzip")
    finished(office, address)
    results = json.loads(office.ask("GET", address + "/results")[2])
    assert results["cases"]["pull"]["von_mises"]["value"] == pytest.approx(100.0, rel=1e-9)
    file = address + "/fields/pull.vtu"
    _, headers, whole = office.ask("GET", file)
    assert "describedby" in headers["Link"]
    status, headers, part = office.ask("GET", file, Range="bytes=10-99")
    assert (status, part) == (206, whole[10:100])
    assert headers["Content-Range"] == f"bytes 10-99/{len(whole)}"
    etag = headers["ETag"]
    assert office.ask("GET", file, If_None_Match=etag)[0] == 304


def test_a_request_is_held_until_its_job_is_final(office: Office) -> None:
    """Longer than any default of the proxy would matter for is tested by its configuration."""
    address = submitted(office, json.dumps(strip(length=150.0)).encode())
    status, headers, body = office.ask("GET", address, Prefer="wait=30")
    assert (status, json.loads(body)["state"]) == (200, "finished")
    assert headers["Preference-Applied"].startswith("wait")
    assert headers["Strict-Transport-Security"]


def test_who_asks_is_what_the_proxy_saw_not_what_the_client_says(office: Office) -> None:
    office.ask("GET", "/v1/jobs", X_Forwarded_For="203.0.113.9", X_Request_Id="who-asks")
    lines = [json.loads(line) for line in office.log.read_text().splitlines() if line[:1] == "{"]
    (line,) = [line for line in lines if line.get("request") == "who-asks"]
    assert "203.0.113.9" not in json.dumps(line)


def test_the_proxy_speaks_tls_alone(office: Office) -> None:
    """In the clear it answers with a fault; no token is asked for."""
    with socket.create_connection(("127.0.0.1", office.port), timeout=PATIENCE) as plain:
        plain.sendall(b"GET / HTTP/1.0\r\n\r\n")
        assert b" 400 " in plain.recv(100)


def test_a_body_beyond_the_limit_is_refused_before_it_is_sent(office: Office) -> None:
    connection = HTTPSConnection("localhost", office.port, timeout=PATIENCE, context=office.trust)
    connection.putrequest("POST", "/v1/jobs")
    connection.putheader("Content-Length", str(300 * 1024**2))
    connection.endheaders()
    answer = connection.getresponse()
    problem = json.load(answer)
    assert (answer.status, answer.headers["Content-Type"]) == (413, "application/problem+json")
    assert problem["cautions"]
    connection.close()


def test_a_server_that_is_down_is_said_with_cautions(office: Office) -> None:
    """The last test: stops the server, not the proxy."""
    office.stop_api()
    status, headers, body = office.ask("GET", "/v1/jobs")
    problem = json.loads(body)
    assert (status, problem["status"], headers["Retry-After"]) == (503, 503, "5")
    assert headers["Content-Type"] == "application/problem+json"
    assert problem["cautions"]
