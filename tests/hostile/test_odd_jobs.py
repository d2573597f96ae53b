"""Odd but valid jobs end as the service says they do: finished with numbers, or told why not.

Each is read, looked over and solved as the API and a worker do it, without queue and pictures. A
warning of NumPy (overflow, division by zero) fails the test: it stands for a number that is none.
"""

import html
from collections import Counter
from collections.abc import Iterator
from pathlib import Path
from random import Random
from typing import Any

import orjson
import pytest
from apispec import APISpec
from apispec.ext.marshmallow import MarshmallowPlugin
from jsonschema import Draft202012Validator

from api.result_schemas import ResultsSchema
from tests.hostile.amount import count
from tests.hostile.odd_jobs import odd_job
from workers.analysis.finite import require_numbers
from workers.document.read import read_document
from workers.errors import FaultyError
from workers.limits import time_limit
from workers.pipeline import run
from workers.preflight import foresee

pytestmark = pytest.mark.slow

JOBS, AT_A_TIME = count(36), 12
DOFS = 20_000
PATIENCE = 60  # for what takes a fraction of a second [s]
BALANCED = 1e-6  # of the load; what the caution on equilibrium allows is far less


@pytest.fixture(scope="module")
def form() -> Draft202012Validator:
    """What the OpenAPI document says of results."""
    spec = APISpec("results", "1", "3.1.0", plugins=[MarshmallowPlugin()])
    spec.components.schema("Results", schema=ResultsSchema)
    components = spec.to_dict()["components"]
    return Draft202012Validator({"$ref": "#/components/schemas/Results", "components": components})


@pytest.mark.parametrize("first", range(0, JOBS, AT_A_TIME))
def test_odd_jobs_are_solved_or_refused_in_words(
    first: int, tmp_path: Path, form: Draft202012Validator
) -> None:
    ends: Counter[str] = Counter()
    unsaid: list[int] = []  # seeds of jobs that failed without a word
    for seed in range(first, min(first + AT_A_TIME, JOBS)):
        document = odd_job(Random(seed))
        folder = tmp_path / str(seed)
        folder.mkdir()
        try:
            with time_limit(PATIENCE):
                results = solve(orjson.dumps(document), folder)
        except FaultyError as error:
            ends[type(error).__name__] += 1
            unsaid += [seed] * (not error.faults or not all(f.message for f in error.faults))
            continue
        ends["finished"] += 1
        check_numbers(results, seed, form)
        check_files(results, document, folder)
    print(f"odd jobs {first} to {seed}: {dict(ends)}")
    assert not unsaid
    assert ends["finished"] >= 0.5 * ends.total(), "too odd to try anything"


def solve(document: bytes, folder: Path) -> Any:
    foresee(read_document(document))
    return run(document, folder, pictures=0, most_dofs=DOFS, seconds=PATIENCE / 6)


def check_numbers(results: Any, seed: int, form: Draft202012Validator) -> None:
    """All finite, of the promised form, in balance, and with their cautions."""
    require_numbers(results)
    written = orjson.loads(orjson.dumps(results))
    faults = [f"{e.json_path}: {e.message}" for e in form.iter_errors(written)]
    assert not faults, (seed, faults)
    assert results["cautions"], seed
    stops = {c["code"] for c in results["cautions"] if c["severity"] == "stop"}
    for name, state in {**results["cases"], **results["combinations"]}.items():
        assert state["equilibrium"]["residual"] <= BALANCED or stops, (seed, name)


def check_files(results: Any, document: Any, folder: Path) -> None:
    """Where they are said to be, inside the folder; the title is text on the sheet."""
    listed = [path for path in words(results["files"]) if not path.startswith("/")]
    for path in listed:
        assert (folder / path).is_file(), path
        assert (folder / path).resolve().is_relative_to(folder.resolve()), path
    title = document["title"]
    sheet = (folder / results["files"]["sheet"]).read_text()
    assert html.escape(title, quote=False)[:50] in sheet.replace("&#39;", "'").replace("&#34;", '"')
    assert title not in sheet or html.escape(title) == title


def words(value: Any) -> Iterator[str]:
    """The strings in an object, without its keys."""
    if isinstance(value, dict):
        for inner in value.values():
            yield from words(inner)
    elif isinstance(value, str):
        yield value
