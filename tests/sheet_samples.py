"""Jobs and results for the tests of the review sheet: small, hostile, and of hundreds of cases.

The results are written by hand; nothing is solved.
"""

from copy import deepcopy
from typing import Any

from tests.job_documents import strip
from tests.small_results import RESULTS
from workers.document.read import load
from workers.job import Job

Json = dict[str, Any]

HOSTILE = "<script>alert(1)</script><img src=x onerror=alert(2)> \"q\" 'a' & \u202e</style>"


def small_document(**changes: Any) -> Json:
    """The document that `small_results` could belong to."""
    return {
        **strip(),
        "combinations": {"pull, factored": {"pull": 1}},
        "requests": {
            "probes": {"middle": [50, 20]},
            "lines": {"axis": {"from": [0, 20], "to": [100, 20], "points": 2}},
            "cuts": {"root": {"from": [50, 0], "to": [50, 40]}},
        },
        **changes,
    }


def small_job(**changes: Any) -> Job:
    return load(small_document(**changes))


def small_results(**changes: Any) -> Json:
    return {**deepcopy(RESULTS), **changes}


def many_cases(count: int) -> tuple[Job, Json]:
    """A job of hundreds of cases: case n has the stress 100 + n, or 500 where n is 7."""
    names = [f"rope {number}" for number in range(count)]
    load_cases = {n: [{"on": "right", "total_force": [1000, 0]}] for n in names}
    job = small_job(load_cases=load_cases, combinations={})
    results = small_results(combinations={})
    pattern = results["cases"].pop("pull")
    for number, name in enumerate(names):
        stress = 500.0 if number == 7 else 100.0 + number
        state = deepcopy(pattern)
        state["von_mises"]["value"] = stress
        state["reactions"]["left"]["force"] = [-stress, 0.0]
        results["cases"][name] = state
    results["envelope"] = {
        quantity: peak and {**peak, "governs": "rope 3"}
        for quantity, peak in results["envelope"].items()
    }
    results["envelope"]["von_mises"] |= {"value": 500.0, "governs": "rope 7"}
    for section in (results["probes"]["middle"], results["lines"]["axis"]["cases"]):
        found = section.pop("pull")
        section.update(dict.fromkeys(names, found))
    results["hot_spots"] = {}
    carried = results["cuts"]["root"].pop("pull")
    results["cuts"]["root"] = {
        name: {**carried, "normal": float(number)} for number, name in enumerate(names)
    }
    return job, results
