"""Solve a plate for every row of a table from a spreadsheet, and bring the peaks back as a table.

    python solve_table.py crane_positions.csv --url http://127.0.0.1:8470 --peaks peaks.csv

The first column of the table names the cases; each further one is headed by a load case of
`job.json` and holds the factor on it. Fishplate takes such a table as it is, with commas between
the columns and decimal points. Spreadsheets of many countries write semicolons and decimal commas:
those are exchanged here, where whoever runs this can look at what becomes of them.
"""

import argparse
import csv
import io
import json
import os
import sys
import time
import urllib.error
import urllib.request
from pathlib import Path

JOB = Path(__file__).with_name("job.json")


def as_job_table(text):
    """The table with commas between columns and decimal points."""
    text = text.removeprefix("\ufeff")  # what spreadsheets put before UTF-8
    if ";" not in text.splitlines()[0]:
        return text
    head, *rows = csv.reader(io.StringIO(text), delimiter=";")
    table = io.StringIO()
    writer = csv.writer(table)
    writer.writerow(head)
    for name, *factors in rows:
        writer.writerow([name, *(factor.replace(",", ".") for factor in factors)])
    return table.getvalue()


def ask(url, body=None, **headers):
    """The answer's bytes, or the server's own words when it refuses."""
    request = urllib.request.Request(url, body, headers)
    if token := os.environ.get("FISHPLATE_TOKEN"):
        request.add_unredirected_header("Authorization", f"Bearer {token}")
    try:
        with urllib.request.urlopen(request, timeout=90) as answer:
            return answer.read()
    except urllib.error.HTTPError as error:
        if error.code == 429:  # too much to do: the server says when to come again
            time.sleep(int(error.headers["Retry-After"]))
            return ask(url, body, **headers)
        problem = json.load(error)  # RFC 9457; says which line and column of the table is wrong
        faults = [f"\n  {f['pointer']}: {f['message']}" for f in problem.get("errors", [])]
        sys.exit(f"{problem['title']}: {problem.get('detail', '')}{''.join(faults)}")


def main():
    parser = argparse.ArgumentParser(description=__doc__.splitlines()[0])
    parser.add_argument("table", type=Path)
    parser.add_argument("--url", default="http://127.0.0.1:8470")
    parser.add_argument("--peaks", type=Path, help="write the peaks of every case here, as CSV")
    arguments = parser.parse_args()
    url = arguments.url.rstrip("/")

    document = json.loads(JOB.read_text())
    document["cases"] = as_job_table(arguments.table.read_text(encoding="utf-8"))
    body = json.dumps(document).encode()
    job = json.loads(ask(f"{url}/v1/jobs", body, **{"Content-Type": "application/json"}))
    here = job["links"]["self"]
    while job["state"] in ("queued", "running"):
        job = json.loads(ask(f"{url}{here}", Prefer="wait=30"))
    if job["state"] != "finished":
        sys.exit(f"The job {job['state']}: {job['reason']}")

    results = json.loads(ask(f"{url}{here}/results"))
    for caution in results["cautions"]:
        print(f"{caution['severity']}: {caution['message']} {caution['action']}")
    peak, use = results["envelope"]["von_mises"], results["envelope"]["utilisation"]
    print(f"{len(results['cases'])} cases; {peak['governs']!r} governs:")
    print(
        f"von Mises {peak['value']:.4g} {results['units']['stress']}, {use['value']:.0%} of yield"
    )
    if arguments.peaks:
        arguments.peaks.write_bytes(ask(f"{url}{here}/tables/peaks.csv"))
        print(f"Peaks of every case: {arguments.peaks}")


if __name__ == "__main__":
    main()
