"""A real `fishplate serve` that other machines may reach: tokens, lines, logs, measures."""

import json
import signal
import subprocess
import time
from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any
from urllib.error import HTTPError
from urllib.request import Request, urlopen

import pytest
from prometheus_client.parser import text_string_to_metric_families

from tests.job_documents import strip
from tests.real_server import PATIENCE, serving
from workers.tokens import Tokens

pytestmark = pytest.mark.server


@dataclass(frozen=True)
class Server:
    process: "subprocess.Popen[bytes]"
    url: str
    store: Path
    tokens: dict[str, str]

    def ask(self, who: str | None, path: str, body: Any = None, **headers: str) -> Any:
        """The answer; an HTTPError is an answer as well."""
        named = {name.replace("_", "-"): value for name, value in headers.items()}
        if who is not None:
            named["Authorization"] = f"Bearer {self.tokens[who]}"
        data = None if body is None else json.dumps(body).encode()
        if data:
            named["Content-Type"] = "application/json"
        try:
            with urlopen(Request(self.url + path, data, named), timeout=PATIENCE) as answer:
                return answer.status, json.load(answer), answer.headers
        except HTTPError as error:
            with error:
                return error.code, json.load(error), error.headers

    def finished(self, who: str, address: str) -> Any:
        until = time.monotonic() + PATIENCE
        while True:
            _, job, _ = self.ask(who, address, Prefer="wait=30")
            if job["state"] not in ("queued", "running"):
                assert job["state"] == "finished", job
                return job
            assert time.monotonic() < until


@pytest.fixture(scope="module")
def server(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Server]:
    """On all addresses of this machine, with one worker."""
    folder = tmp_path_factory.mktemp("guarded")
    store = folder / "store"
    made = Tokens(store)
    tokens = {
        "ana": made.add("ana", "submit", "dock")[1],
        "ben": made.add("ben", "submit", "slip")[1],
        "monitor": made.add("monitor", "read", "monitoring")[1],
    }
    settings = {"FISHPLATE_STORE": str(store), "FISHPLATE_WORKERS": "1",
                "FISHPLATE_PICTURES": "0", "FISHPLATE_HOUSEKEEPING_EVERY": "0.5"}  # fmt: skip
    with serving(folder / "serve", settings, "--host", "0.0.0.0") as (process, url):
        yield Server(process, url.replace("0.0.0.0", "127.0.0.1"), store, tokens)


def test_without_a_token_only_liveness_and_the_documentation_are_answered(server: Server) -> None:
    assert server.ask(None, "/health/live")[0] == 200
    for path in ("/v1/jobs", "/metrics", "/health/ready"):
        status, problem, headers = server.ask(None, path)
        assert status == 401
        assert problem["cautions"]
        assert headers["WWW-Authenticate"].startswith("Bearer ")


def test_a_job_is_seen_by_its_workspace_alone(server: Server) -> None:
    """The strip: 32000 N / (40 mm x 8 mm) = 100 MPa; Q8 has it exactly."""
    status, job, headers = server.ask("ana", "/v1/jobs", strip(), X_Request_Id="order-17")
    assert (status, headers["X-Request-Id"]) == (202, "order-17")
    here = headers["Location"]
    server.finished("ana", here)
    _, results, _ = server.ask("ana", f"{here}/results")
    peak = results["cases"]["pull"]["von_mises"]["value"]
    assert peak == pytest.approx(100.0, rel=1e-9)
    assert (job["owner"], job["workspace"]) == ("ana", "dock")
    assert server.ask("ben", here)[0] == 404
    assert server.ask("ben", "/v1/jobs")[1]["jobs"] == []


def test_a_single_job_overtakes_a_batch_of_a_colleague(server: Server) -> None:
    """With the only worker busy: what ended before it is no more than a few."""
    batch = [{**strip(length=100.0 + n), "label": "batch"} for n in range(16)]
    addresses = [server.ask("ana", "/v1/jobs", document)[2]["Location"] for document in batch]
    status, job, headers = server.ask("ben", "/v1/jobs", strip())
    assert (status, job["priority"]) == (202, "interactive")
    single = server.finished("ben", headers["Location"])
    ended = [server.finished("ana", address)["times"]["ended"] for address in addresses]
    later = sum(moment > single["times"]["ended"] for moment in ended)
    assert later > len(batch) / 2


def test_measures_are_the_same_from_every_process(server: Server) -> None:
    """Asked several times, so that both processes of the HTTP server answer."""
    until = time.monotonic() + PATIENCE
    while not (server.store / "usage.json").exists():
        assert time.monotonic() < until
        time.sleep(0.1)
    for _ in range(8):
        request = Request(server.url + "/metrics")
        request.add_header("Authorization", f"Bearer {server.tokens['monitor']}")
        with urlopen(request, timeout=PATIENCE) as answer:
            families = text_string_to_metric_families(answer.read().decode())
        samples = {
            (s.name, *sorted(s.labels.values())): s.value for f in families for s in f.samples
        }
        assert samples["fishplate_jobs", "finished"] == 18
        assert samples["fishplate_jobs_ended_total", "", "finished"] == 18
        assert samples["fishplate_stage_seconds_count", "waiting"] == 18
        assert samples["fishplate_stage_seconds_sum", "solving"] > 0.0
        assert samples["fishplate_workers_alive",] == 1
        assert samples["fishplate_store_bytes",] > 0


def test_every_line_of_the_log_is_an_object_and_names_request_and_job(server: Server) -> None:
    text = server.store.with_name("serve.log").read_text()
    lines = [json.loads(line) for line in text.splitlines() if line.startswith("{")]
    order = [line for line in lines if line.get("request") == "order-17"]
    assert {line["logger"] for line in order} == {"api.jobs", "api.access"}
    (job_id,) = {line["job"] for line in order if "job" in line}
    assert any(line["logger"] == "workers.tasks" and line["job"] == job_id for line in lines)
    # Beside these there is only what `serve` says to the person who started it.
    rest = [line for line in text.splitlines() if not line.startswith("{")]
    assert all(line.startswith(("Fishplate listens", "http", "jobs are kept")) for line in rest)
    assert not any(token in text for token in server.tokens.values())


def test_the_server_stops_cleanly_when_told(server: Server) -> None:
    """The last test of this module: the job at work ends or waits in line again, none is lost."""
    headers = [server.ask("ana", "/v1/jobs", strip(length=50.0 + n))[2] for n in range(5)]
    server.process.send_signal(signal.SIGTERM)
    assert server.process.wait(PATIENCE) == 0
    for header in headers:
        job_id = header["Location"].rsplit("/", 1)[1]
        (path,) = (server.store / "jobs").glob(f"*/{job_id}/record.json")
        record = json.loads(path.read_text())
        assert record["history"][-1]["state"] in ("finished", "queued")
