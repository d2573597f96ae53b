"""Choose the thinnest plate in stock that carries the load: another program that calls Fishplate.

    python choose_thickness.py --url http://127.0.0.1:8470 --sheet chosen.html

Needs nothing but Python's standard library and plain HTTP. The same document is sent with one
thickness after the other; the jobs run side by side, and the first that is used to less than the
allowed part of its yield strength, without a caution that stops, is chosen. Where the server wants
a token, put it into FISHPLATE_TOKEN.
"""

import argparse
import hashlib
import json
import os
import sys
import time
import urllib.error
import urllib.request
from pathlib import Path

JOB = Path(__file__).with_name("job.json")
IN_STOCK = (6, 8, 10, 12, 15, 20)  # mm
ALLOWED = 0.8  # of the yield strength, factored loads included


def ask(url, body=None, **headers):
    """The answer's bytes, or the server's own words when it refuses."""
    request = urllib.request.Request(url, body, headers)
    if token := os.environ.get("FISHPLATE_TOKEN"):
        request.add_unredirected_header("Authorization", f"Bearer {token}")
    while True:
        try:
            with urllib.request.urlopen(request, timeout=90) as answer:
                return answer.read()
        except urllib.error.HTTPError as error:
            if error.code == 429:  # too much to do: the server says when to come again
                time.sleep(int(error.headers["Retry-After"]))
                continue
            problem = json.load(error)  # RFC 9457
            faults = [f"\n  {f['pointer']}: {f['message']}" for f in problem.get("errors", [])]
            sys.exit(f"{problem['title']}: {problem.get('detail', '')}{''.join(faults)}")


def submit(url, document):
    """Queue a job; sent again, the same document is the same job."""
    body = json.dumps(document).encode()
    key = hashlib.sha256(body).hexdigest()
    headers = {"Content-Type": "application/json", "Idempotency-Key": key}
    return json.loads(ask(f"{url}/v1/jobs", body, **headers))["links"]["self"]


def wait_for(url, here):
    """Hold until the job is final; its record tells how it ended."""
    while True:
        job = json.loads(ask(f"{url}{here}", Prefer="wait=30"))
        if job["state"] not in ("queued", "running"):
            return job


def main():
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("--url", default="http://127.0.0.1:8470")
    parser.add_argument("--sheet", type=Path, help="file the chosen plate's review sheet here")
    arguments = parser.parse_args()
    url = arguments.url.rstrip("/")

    document = json.loads(JOB.read_text())
    jobs = {}
    for thickness in IN_STOCK:
        document["plate"]["thickness"] = thickness
        jobs[thickness] = submit(url, document)

    chosen = None
    for thickness, here in jobs.items():
        job = wait_for(url, here)
        if job["state"] != "finished":
            sys.exit(f"{thickness} mm: {job['state']}: {job['reason']}")
        results = json.loads(ask(f"{url}{here}/results"))
        use = results["envelope"]["utilisation"]
        stops = [c["message"] for c in results["cautions"] if c["severity"] == "stop"]
        good = use["value"] <= ALLOWED and not stops
        print(
            f"{thickness:>3} mm: {use['value']:4.0%} of yield in {use['governs']!r}"
            f"{f', {len(stops)} cautions that stop' if stops else ''}{'' if good else ': no'}"
        )
        if good and chosen is None:
            chosen = thickness, here, results

    if chosen is None:
        sys.exit("No plate in stock is thick enough.")
    thickness, here, results = chosen
    print(f"Chosen: {thickness} mm. Look at its cautions before it is used:")
    for caution in results["cautions"]:
        print(f"  {caution['severity']}: {caution['message']} {caution['action']}")
    if arguments.sheet:
        arguments.sheet.write_bytes(ask(f"{url}{here}/sheet"))
        print(f"Review sheet: {arguments.sheet}")


if __name__ == "__main__":
    main()
