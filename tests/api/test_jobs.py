"""Jobs over HTTP: accepting, repeating, listing, waiting, cancelling, removing."""

import gzip
import threading
from collections.abc import Callable
from typing import Any

import orjson
import pytest
from flask.testing import FlaskClient

from api.services import Services
from tests.job_documents import strip
from workers.record import CANCELLED, FINISHED, QUEUED, RUNNING

Post = Callable[..., Any]
Finish = Callable[[str], None]


# --- accepting -----------------------------------------------------------------------------------


def test_an_accepted_job_is_on_disk_and_in_line(
    post: Post, client: FlaskClient, services: Services
) -> None:
    answer = post(strip())
    job = answer.get_json()
    assert answer.status_code == 202
    assert answer.headers["Location"] == job["links"]["self"]
    assert client.get(answer.headers["Location"]).get_json()["state"] == QUEUED
    assert orjson.loads(services.store.document(job["id"])) == strip()
    assert services.queue.waiting() == {job["id"]}


def test_a_gzip_document_is_kept_unpacked(client: FlaskClient, services: Services) -> None:
    """What a worker reads is the document, however it was sent."""
    document = orjson.dumps(strip())
    headers = {"Content-Encoding": "gzip", "Content-Type": "application/json"}
    answer = client.post("/v1/jobs", data=gzip.compress(document), headers=headers)
    assert services.store.document(answer.get_json()["id"]) == document


def test_all_faults_of_a_document_come_at_once(post: Post, services: Services) -> None:
    document = strip()
    document["plate"]["thickness"] = -1
    document["materials"]["steel"]["poissons_ratio"] = 0.5
    document["supports"][0]["on"] = "nowhere"
    document["colour"] = "red"
    answer = post(document)
    assert answer.status_code == 422
    assert answer.mimetype == "application/problem+json"
    assert {e["pointer"] for e in answer.get_json()["errors"]} == {
        "/plate/thickness",
        "/materials/steel/poissons_ratio",
        "/supports/0/on",
        "/colour",
    }
    assert not services.store.list().records


def test_a_plate_that_is_free_to_move_is_refused_before_the_queue(post: Post) -> None:
    """Known from the supports alone: nothing holds it in x."""
    answer = post({**strip(), "supports": [{"on": "left", "uy": 0}]})
    assert answer.status_code == 422
    assert answer.get_json()["errors"][0]["pointer"].startswith("/supports")


def test_a_document_above_the_limit_is_refused(client: FlaskClient, services: Services) -> None:
    document = b" " * (services.settings.body_bytes + 1)
    answer = client.post("/v1/jobs", data=document, content_type="application/json")
    assert answer.status_code == 413
    assert answer.get_json()["type"].endswith("#problem-body-too-large")


# --- Idempotency-Key -----------------------------------------------------------------------------


def test_a_repeated_key_answers_with_the_first_job(post: Post, services: Services) -> None:
    first, again = post(Idempotency_Key="one"), post(Idempotency_Key="one")
    assert (first.status_code, again.status_code) == (202, 200)
    assert first.get_json()["id"] == again.get_json()["id"]
    assert first.headers["Location"] == again.headers["Location"]
    assert len(services.store.list().records) == 1


def test_a_key_cannot_be_used_for_another_document(post: Post) -> None:
    first = post(Idempotency_Key="one").get_json()
    answer = post(strip(force=1.0), Idempotency_Key="one")
    assert answer.status_code == 422
    assert answer.get_json()["type"].endswith("#problem-idempotency-key-reused")
    assert first["id"] in answer.get_json()["detail"]


def test_without_a_key_the_same_document_is_another_job(post: Post) -> None:
    assert post().get_json()["id"] != post().get_json()["id"]


@pytest.mark.parametrize("key", ["", "x" * 201, "tab\tinside"])
def test_unusable_keys_are_refused(post: Post, key: str) -> None:
    answer = post(Idempotency_Key=key)
    assert answer.status_code == 400
    assert answer.get_json()["errors"][0]["parameter"] == "Idempotency-Key"


# --- listing -------------------------------------------------------------------------------------


def test_following_next_lists_every_job_once_newest_first(post: Post, client: FlaskClient) -> None:
    ids = [post().get_json()["id"] for _ in range(5)]
    found, address = [], "/v1/jobs?limit=2"
    while address:
        answer = client.get(address)
        page = answer.get_json()
        assert len(page["jobs"]) <= 2
        assert (answer.headers.get("Link") is not None) == (page["next"] is not None)
        found += [job["id"] for job in page["jobs"]]
        address = page["next"]
    assert found == ids[::-1]


def test_lists_are_narrowed_by_state_and_label(
    post: Post, client: FlaskClient, finish: Finish
) -> None:
    post()
    labelled = post({**strip(), "label": "dock & slip"}).get_json()["id"]
    finish(labelled)
    for query in ({"label": "dock & slip"}, {"state": FINISHED}):
        jobs = client.get("/v1/jobs", query_string=query).get_json()["jobs"]
        assert [job["id"] for job in jobs] == [labelled]


def test_next_keeps_the_filters(post: Post, client: FlaskClient) -> None:
    for label in ("dock & slip", "other", "dock & slip"):
        post({**strip(), "label": label})
    first = client.get("/v1/jobs", query_string={"label": "dock & slip", "limit": 1}).get_json()
    second = client.get(first["next"]).get_json()
    assert [job["label"] for job in second["jobs"]] == ["dock & slip"]
    assert second["next"] is None


def test_every_wrong_query_parameter_is_named(client: FlaskClient) -> None:
    answer = client.get("/v1/jobs?state=lost&limit=0&colour=red&after=x")
    assert answer.status_code == 400
    named = {error["parameter"] for error in answer.get_json()["errors"]}
    assert named == {"state", "limit", "colour", "after"}


# --- looking and waiting -------------------------------------------------------------------------


def test_a_running_job_shows_its_stage(post: Post, client: FlaskClient, services: Services) -> None:
    job_id = post().get_json()["id"]
    services.store.transition(job_id, RUNNING)
    services.queue.set_progress(job_id, "solving", 0.25)
    job = client.get(f"/v1/jobs/{job_id}").get_json()
    assert job["progress"] == {"stage": "solving", "fraction": 0.25}
    assert job["times"]["started"] is not None
    assert job["attempts"] == 1


def test_waiting_ends_when_the_job_is_finished(
    post: Post, client: FlaskClient, finish: Finish
) -> None:
    job_id = post().get_json()["id"]
    threading.Timer(0.2, finish, [job_id]).start()
    answer = client.get(f"/v1/jobs/{job_id}", headers={"Prefer": "wait=30"})
    assert answer.get_json()["state"] == FINISHED
    assert answer.headers["Preference-Applied"] == "wait=30"


def test_waiting_ends_with_the_time_and_tells_the_state(post: Post, client: FlaskClient) -> None:
    answer = client.get(post().headers["Location"], headers={"Prefer": "wait=0"})
    assert answer.get_json()["state"] == QUEUED


def test_a_wait_beyond_the_limit_is_shortened_and_said_so(
    post: Post, client: FlaskClient, finish: Finish, services: Services
) -> None:
    job_id = post().get_json()["id"]
    finish(job_id)
    answer = client.get(f"/v1/jobs/{job_id}", headers={"Prefer": "wait=999999"})
    longest = services.settings.longest_wait
    assert answer.headers["Preference-Applied"] == f"wait={longest}"


def test_a_job_removed_while_somebody_waits_is_gone(
    post: Post, client: FlaskClient, services: Services
) -> None:
    job_id = post().get_json()["id"]

    def remove() -> None:
        services.store.transition(job_id, CANCELLED)
        services.store.remove(job_id)

    threading.Timer(0.2, remove).start()
    answer = client.get(f"/v1/jobs/{job_id}", headers={"Prefer": "wait=30"})
    assert answer.status_code in (200, 404)  # whichever of the two steps it saw


# --- cancelling and removing ---------------------------------------------------------------------


def test_deleting_cancels_first_and_removes_then(post: Post, client: FlaskClient) -> None:
    address = post().headers["Location"]
    assert client.delete(address).get_json()["done"] == "cancelled"
    assert client.get(address).get_json()["state"] == CANCELLED
    assert client.delete(address).get_json()["done"] == "removed"
    assert client.get(address).status_code == 404
    assert client.delete(address).status_code == 404
