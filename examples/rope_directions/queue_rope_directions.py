"""Queue 300 rope directions on the boat-lift lug: as one job with 300 cases, or as 300 jobs.

    python queue_rope_directions.py --url http://127.0.0.1:8470
    python queue_rope_directions.py --url http://127.0.0.1:8470 --as-jobs

The hoist's rope can pull the lug at any angle within 75 degrees of the vertical. Needs nothing but
Python's standard library: this is how any program calls Fishplate over plain HTTP. Where the server
wants a token, put it into FISHPLATE_TOKEN.
"""

import argparse
import json
import math
import os
import sys
import time
import urllib.error
import urllib.request
from pathlib import Path

LUG = Path(__file__).resolve().parent.parent / "lug" / "job.json"
ROPE_FORCE = 60_000.0  # N
WIDEST_ANGLE = 75.0  # degrees from the vertical


def rope_directions(count):
    """Name and pin force [N] of each direction, evenly spaced from left to right."""
    for number in range(count):
        angle = WIDEST_ANGLE * (2 * number / max(count - 1, 1) - 1)
        pull = math.radians(angle)
        force = [ROPE_FORCE * math.sin(pull), ROPE_FORCE * math.cos(pull)]
        yield f"rope {number + 1} at {angle:+.1f} deg", force


def load_case(force):
    return [{"on": "pin", "bearing": force}]


def call(method, url, body=None, headers=None):
    """Status, headers and JSON answer; the server's own words when it refuses."""
    data = None if body is None else json.dumps(body).encode()
    request = urllib.request.Request(url, data, headers or {}, method=method)
    if data is not None:
        request.add_header("Content-Type", "application/json")
    if token := os.environ.get("FISHPLATE_TOKEN"):
        request.add_unredirected_header("Authorization", f"Bearer {token}")
    try:
        with urllib.request.urlopen(request, timeout=120) as answer:
            return answer.status, answer.headers, json.loads(answer.read())
    except urllib.error.HTTPError as error:
        if error.code == 429:  # too many at a time: the server says when there is room again
            time.sleep(int(error.headers["Retry-After"]))
            return call(method, url, body, headers)
        problem = json.loads(error.read())
        faults = "".join(f"\n  {f['pointer']}: {f['message']}" for f in problem.get("errors", []))
        sys.exit(f"{error.code} {problem['title']}: {problem.get('detail', '')}{faults}")


def submit(url, document, key):
    """Queue one job; the key makes a repeated call harmless."""
    _, _, job = call("POST", f"{url}/v1/jobs", document, {"Idempotency-Key": key})
    return job["id"]


def wait(url, job_id):
    """Hold until the job is final; returns its record."""
    while True:
        _, _, job = call("GET", f"{url}/v1/jobs/{job_id}", headers={"Prefer": "wait=30"})
        if job["state"] in ("finished", "failed", "cancelled"):
            return job


def peaks(url, job_id):
    """Peak von Mises stress by case of a finished job."""
    _, _, results = call("GET", f"{url}/v1/jobs/{job_id}/results")
    for caution in results["cautions"]:
        print(f"  caution [{caution['severity']}] {caution['message']}")
    return {name: case["von_mises"] for name, case in results["cases"].items()}


def as_one_job(url, lug, count, key):
    lug["load_cases"] = {name: load_case(force) for name, force in rope_directions(count)}
    job = wait(url, submit(url, lug, key))
    if job["state"] != "finished":
        sys.exit(f"the job {job['state']}: {job.get('errors')}")
    return peaks(url, job["id"])


def as_many_jobs(url, lug, count, key):
    """One job for each direction, all queued before the first is waited for."""
    waiting = []
    for name, force in rope_directions(count):
        lug["load_cases"] = {name: load_case(force)}
        waiting.append((name, submit(url, lug, f"{key} {name}")))
        print(f"\r{len(waiting)} of {count} queued", end="", flush=True)
    print()
    found = {}
    for name, job_id in waiting:
        job = wait(url, job_id)
        if job["state"] != "finished":
            print(f"{name}: {job['state']}: {job.get('errors')}")
            continue
        _, _, results = call("GET", f"{url}/v1/jobs/{job_id}/results")
        found[name] = results["cases"][name]["von_mises"]
        print(f"\r{len(found)} of {count} finished", end="", flush=True)
    print()
    return found


def main():
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--url", default="http://127.0.0.1:8470")
    parser.add_argument("--count", type=int, default=300)
    parser.add_argument("--as-jobs", action="store_true", help="300 jobs instead of one")
    arguments = parser.parse_args()

    lug = json.loads(LUG.read_text())
    lug.update(title="Boat-lift lug, rope directions", label="rope directions", combinations={})
    key = f"rope directions {time.time_ns()}"
    run = as_many_jobs if arguments.as_jobs else as_one_job
    found = run(arguments.url, lug, arguments.count, key)

    worst = max(found, key=lambda name: found[name]["value"])
    peak = found[worst]
    print(f"{len(found)} rope directions; the largest von Mises stress is {peak['value']:.1f} MPa")
    print(f"for {worst!r} at ({peak['at'][0]:.1f}, {peak['at'][1]:.1f}) mm")
    print("Linear plane stress only; a qualified engineer must review, local codes govern.")


if __name__ == "__main__":
    main()
