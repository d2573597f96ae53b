"""Real servers with Redis and workers, one and two of each, and plates whose answer is known."""

import csv
import io
import itertools
import json
import re
import signal
import time
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any
from urllib.error import HTTPError
from urllib.parse import quote
from urllib.request import Request, urlopen
from zipfile import ZipFile

import numpy as np
import pytest
import pyvista
from jsonschema import Draft202012Validator

from tests.job_documents import hanging_bar, strip
from tests.real_server import PATIENCE, Server, real_server, real_services

pytestmark = pytest.mark.server

E, NU = 210_000.0, 0.3  # N/mm2


@pytest.fixture(scope="module", params=[real_server, real_services], ids=["one", "two"])
def server(
    request: pytest.FixtureRequest, tmp_path_factory: pytest.TempPathFactory
) -> Iterator[Server]:
    with request.param(tmp_path_factory.mktemp("server")) as server:
        yield server


@pytest.fixture(scope="module")
def ask(server: Server) -> Callable[..., tuple[bytes, Any]]:
    """Body and headers of an answer."""
    urls = itertools.cycle(server.urls)

    def request(path: str, body: Any = None, **headers: str) -> tuple[bytes, Any]:
        data = None if body is None else json.dumps(body).encode()
        sent = {"Content-Type": "application/json", **headers}
        with urlopen(Request(next(urls) + quote(path), data, sent), timeout=PATIENCE) as answer:
            return answer.read(), answer.headers

    return request


def solve(ask: Callable[..., tuple[bytes, Any]], document: dict[str, Any]) -> tuple[str, Any]:
    """Address and results of a document."""
    body, headers = ask("/v1/jobs", document)
    here = headers["Location"]
    assert json.loads(body)["links"]["self"] == here
    until = time.monotonic() + PATIENCE
    job = json.loads(body)
    while job["state"] in ("queued", "running"):
        assert time.monotonic() < until
        job = json.loads(ask(here, Prefer="wait=30")[0])
    assert (job["state"], job["reason"], job["errors"]) == ("finished", None, [])
    return here, json.loads(ask(f"{here}/results")[0])


@pytest.fixture(scope="module")
def pulled(ask: Callable[..., tuple[bytes, Any]]) -> tuple[str, Any]:
    """The strip, pulled with 32 kN and with twice that."""
    return solve(ask, {**strip(), "combinations": {"pull twice": {"pull": 2}}})


# The strip: force / (height x thickness) = 32000 / (40 x 8) = 100 MPa everywhere. Q8 represents it
# exactly, so that only rounding is left; 1e-9 is far above it and far below any mistake.
EXACT = 1e-9


def test_a_pulled_strip_has_its_stress_movement_and_reaction(pulled: tuple[str, Any]) -> None:
    state = pulled[1]["cases"]["pull"]
    assert state["von_mises"]["value"] == pytest.approx(100.0, rel=EXACT)
    assert state["shear_max"]["value"] == pytest.approx(50.0, rel=EXACT)
    # the corner farthest from the held one moves by stress / E times (length, -nu height)
    moved = 100.0 / E * np.hypot(100.0, NU * 40.0)
    assert state["displacement"]["value"] == pytest.approx(moved, rel=EXACT)
    assert state["reactions"]["left"]["force"][0] == pytest.approx(-32_000.0, rel=EXACT)
    assert state["utilisation"]["value"] == pytest.approx(100.0 / 355.0, rel=EXACT)
    assert state["equilibrium"]["residual"] < EXACT
    twice = pulled[1]["combinations"]["pull twice"]
    assert twice["von_mises"]["value"] == pytest.approx(200.0, rel=EXACT)


def test_a_hanging_bar_has_the_stress_of_its_weight(ask: Callable[..., tuple[bytes, Any]]) -> None:
    """Stress w y with w = 7.85e-9 t/mm3 x 9810 mm/s2; the lower end moves w height^2 / (2 E)."""
    _, results = solve(ask, hanging_bar(height=200.0, width=20.0))
    state, w = results["cases"]["self weight"], 7.85e-9 * 9810.0
    assert state["von_mises"]["value"] == pytest.approx(w * 200.0, rel=EXACT)
    assert state["displacement"]["value"] == pytest.approx(w * 200.0**2 / (2 * E), rel=EXACT)
    weight = w * 200.0 * 20.0 * 8.0
    assert state["reactions"]["high"]["force"][1] == pytest.approx(weight, rel=EXACT)


def test_results_are_as_the_openapi_document_describes_them(
    ask: Callable[..., tuple[bytes, Any]], pulled: tuple[str, Any]
) -> None:
    document = json.loads(ask("/openapi.json")[0])
    schema = {"$ref": "#/components/schemas/Results", "components": document["components"]}
    assert [e.message for e in Draft202012Validator(schema).iter_errors(pulled[1])] == []
    assert pulled[1]["cautions"]


def test_fields_are_a_vtk_file_with_the_stress_and_the_cautions(
    ask: Callable[..., tuple[bytes, Any]], pulled: tuple[str, Any], tmp_path: Path
) -> None:
    """Read by VTK's own reader; fields are stored in single precision: 24 bits, 6e-8."""
    here, results = pulled
    body, headers = ask(f"{here}/fields/pull twice.vtu")
    assert 'rel="describedby"' in headers["Link"]
    path = tmp_path / "fields.vtu"
    path.write_bytes(body)
    grid = pyvista.read(path)
    assert grid.n_points == results["mesh"]["nodes"]
    stress = grid.point_data["stress"]
    assert stress == pytest.approx(np.tile([200.0, 0.0, 0.0], (len(stress), 1)), abs=200 * 1e-6)
    assert grid.point_data["displacement"][:, 0].max() == pytest.approx(2 * 100 / E * 100, rel=1e-6)
    assert "engineer" in " ".join(map(str, np.ravel(grid.field_data["cautions"])))


def test_a_field_that_is_not_there_is_made_again_the_same(
    server: Server, ask: Callable[..., tuple[bytes, Any]], pulled: tuple[str, Any]
) -> None:
    """Of jobs with many cases only the first fields are written at once."""
    here, _ = pulled
    with_the_job, _ = ask(f"{here}/fields/pull.vtu")
    job_id = here.rsplit("/", 1)[1]
    (path,) = (server.store / "jobs").glob(f"*/{job_id}/results/fields/pull.vtu")
    path.unlink()
    assert ask(f"{here}/fields/pull.vtu")[0] == with_the_job


@pytest.mark.parametrize("case", ["pull twice", "pull"])
def test_pictures_are_served_whether_made_with_the_job_or_on_request(
    ask: Callable[..., tuple[bytes, Any]], pulled: tuple[str, Any], case: str, tmp_path: Path
) -> None:
    here, results = pulled
    if not results["pictures"]["available"]:
        pytest.skip(results["pictures"]["reason"])
    made = results["files"]["previews"].get(case, {})
    assert ("principal_min" in made) == (case == "pull twice")
    body, headers = ask(f"{here}/previews/{case}/principal_min.png")
    assert 'rel="describedby"' in headers["Link"]
    path = tmp_path / "picture.png"
    path.write_bytes(body)
    image = pyvista.read(path)
    assert min(image.dimensions[:2]) >= 600
    assert np.ptp(image.active_scalars, axis=0).min() > 100  # something is drawn


def test_a_check_says_what_would_happen(
    ask: Callable[..., tuple[bytes, Any]], pulled: tuple[str, Any], tmp_path: Path
) -> None:
    """The strip is pulled with 32 kN, weighs 0.2512 kg, and has the mesh that it was solved on."""
    body, headers = ask("/v1/checks", {**strip(), "combinations": {"pull twice": {"pull": 2}}})
    found = json.loads(body)
    assert found["cases"]["pull"]["force"] == pytest.approx([32_000, 0], abs=1e-6)
    assert found["plate"]["mass"] == {"value": pytest.approx(0.2512), "unit": "kg"}
    assert found["mesh"] == pulled[1]["mesh"]
    assert found["estimate"]["factor_entries"] == pulled[1]["solver"]["factor_entries"]
    document = json.loads(ask("/openapi.json")[0])
    schema = {"$ref": "#/components/schemas/JobCheck", "components": document["components"]}
    assert [e.message for e in Draft202012Validator(schema).iter_errors(found)] == []
    assert json.loads(ask(headers["Content-Location"])[0]) == found
    if found["pictures"]["available"]:
        picture, headers = ask(found["links"]["preview"].replace("{case}", "pull twice"))
        assert picture.startswith(b"\x89PNG")  # ISO/IEC 15948, 5.2
        assert found["links"]["self"] in headers["Link"]


def test_a_check_finds_what_only_the_mesh_shows(ask: Callable[..., tuple[bytes, Any]]) -> None:
    """An outline is meshed by a worker: only there is a selector found to catch nothing."""
    document = strip()
    document["geometry"] = {
        "outline": [{"at": at} for at in ([0, 0], [100, 0], [100, 40])] + [
            {"at": [0, 40], "side": "left"}
        ],
    }  # fmt: skip
    document["supports"] = [{"on": "left", "ux": 0, "uy": 0}]
    nowhere = {"segment": [[10, 0], [10, 40]]}
    document["load_cases"] = {"pull": [{"on": nowhere, "traction": [1, 0]}]}
    with pytest.raises(HTTPError) as error:
        ask("/v1/checks", document)
    with error.value as answer:
        assert answer.code == 422
        faults = json.load(answer)["errors"]
    assert [fault["pointer"] for fault in faults] == ["/load_cases/pull/0/on"]


def test_the_sheet_and_the_archive_tell_the_known_answer(
    ask: Callable[..., tuple[bytes, Any]], pulled: tuple[str, Any]
) -> None:
    """The sheet has the stress of 200 MPa; the archive has the sheet, byte for byte."""
    here, results = pulled
    sheet, headers = ask(f"{here}/sheet")
    assert 'rel="describedby"' in headers["Link"]
    text = sheet.decode()
    assert re.search(r"200\s*<span class=\"unit\">MPa", text)
    assert results["job"]["checksum"] in text
    assert text.count("data:image/png") == (5 if results["pictures"]["available"] else 0)
    with ZipFile(io.BytesIO(ask(f"{here}/archive.zip")[0])) as archive:
        assert archive.testzip() is None
        assert archive.read("sheet.html") == sheet
        assert {"job.json", "results.json", "tables/peaks.csv"} <= {*archive.namelist()}


def test_jobs_of_one_label_have_the_envelope_of_one_job_with_their_cases(
    ask: Callable[..., tuple[bytes, Any]], tmp_path: Path
) -> None:
    """At every node; values survive the table exactly, the sums may differ in the last digit."""
    pulls = {"light": 8_000.0, "heavy": 32_000.0, "back": -40_000.0}
    cases = {name: [{"on": "right", "total_force": [pull, 0]}] for name, pull in pulls.items()}
    one, _ = solve(ask, {**strip(), "load_cases": cases})
    label = "slings 12/31"
    ids = {}
    for name in pulls:
        document = {**strip(), "label": label, "load_cases": {name: cases[name]}}
        ids[name] = solve(ask, document)[0].rsplit("/", 1)[1]
    batch = json.loads(ask(f"/v1/batches/{label}")[0])
    assert (batch["jobs"]["finished"], batch["progress"], batch["meshes"]) == (3, 1.0, 1)
    (envelope,) = batch["envelopes"]
    assert envelope["von_mises"]["value"] == pytest.approx(125.0, rel=EXACT)  # 40000 / (40 x 8)
    assert envelope["principal_max"]["governs"]["job"] == ids["heavy"]
    assert envelope["principal_min"]["governs"]["job"] == ids["back"]

    def rows(path: str) -> list[dict[str, str]]:
        return list(csv.DictReader(io.StringIO(ask(path)[0].decode())))

    joint, ours = rows(f"/v1/batches/{label}/envelope/nodes.csv"), rows(f"{one}/envelope/nodes.csv")
    assert joint[0].keys() == ours[0].keys()
    for there, here in zip(joint, ours, strict=True):
        assert float(there["principal_max [MPa]"]) == pytest.approx(
            float(here["principal_max [MPa]"]), rel=1e-12
        )
        assert there["principal_max governed by"] == f"heavy ({ids['heavy']})"
    body, headers = ask(f"/v1/batches/{label}/envelope/fields.vtu")
    assert "/v1/batches/slings%2012%2F31>" in headers["Link"]
    path = tmp_path / "joint.vtu"
    path.write_bytes(body)
    governing = {*np.unique(pyvista.read(path).point_data["principal_min_governs"])}
    states = [str(state) for state in pyvista.read(path).field_data["states"]]
    assert {states[state] for state in governing} == {f"back ({ids['back']})"}


def test_a_running_job_is_cancelled_at_once_and_its_worker_is_free(
    server: Server, ask: Callable[..., tuple[bytes, Any]]
) -> None:
    long = strip()
    long["geometry"]["patches"][0]["divisions"] = [400, 160]  # far longer than a small job
    here = json.loads(ask("/v1/jobs", long)[0])["links"]["self"]
    until = time.monotonic() + PATIENCE
    while json.loads(ask(here)[0])["state"] != "running":
        assert time.monotonic() < until
        time.sleep(0.05)
    with urlopen(Request(server.url + here, method="DELETE"), timeout=PATIENCE) as answer:
        assert json.load(answer)["done"] == "cancelled"
    assert json.loads(ask(here)[0])["state"] == "cancelled"
    solve(ask, strip())
    assert json.loads(ask(here)[0])["state"] == "cancelled"


def test_a_wrong_document_never_reaches_a_worker(ask: Callable[..., tuple[bytes, Any]]) -> None:
    with pytest.raises(HTTPError) as error:
        ask("/v1/jobs", {**strip(), "supports": [{"on": "left", "uy": 0}]})
    with error.value as answer:
        assert answer.code == 422
        assert json.load(answer)["errors"][0]["pointer"].startswith("/supports")


def test_the_server_is_ready(server: Server, ask: Callable[..., tuple[bytes, Any]]) -> None:
    checks = json.loads(ask("/health/ready")[0])["checks"]
    assert {check["name"] for check in checks if check["ok"]} == {"queue", "store", "workers"}
    detail = {check["name"]: check["detail"] for check in checks}
    assert detail["workers"] == f"{server.workers} alive"


def test_all_jobs_are_on_one_list_whoever_was_asked(
    server: Server, ask: Callable[..., tuple[bytes, Any]]
) -> None:
    lists = [json.loads(ask("/v1/jobs")[0])["jobs"] for _ in server.urls]
    assert all(jobs == lists[0] for jobs in lists)
    assert len(lists[0]) == len(list((server.store / "jobs").glob("*/*"))) > 1


def test_the_server_stops_cleanly_when_told(server: Server) -> None:
    """The last test of this module: status 0, and nothing left that listens."""
    for process in server.processes:
        process.send_signal(signal.SIGTERM)
    for process in server.processes:
        assert process.wait(PATIENCE) == 0
    for url in server.urls:
        with pytest.raises(OSError, match="refused"):
            urlopen(url + "/health/live", timeout=5)
