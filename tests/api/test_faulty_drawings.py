"""Faulty drawings over HTTP: each its own 422, with pointer and place, and nothing in the queue."""

import re
from collections.abc import Callable
from typing import Any

import pytest

from api.services import Services
from tests.analysis.test_outline_faults import FAULTS
from tests.good_documents import good


@pytest.mark.parametrize("name", FAULTS)
def test_a_faulty_drawing_is_answered_with_what_is_wrong_and_where(
    name: str, post: Callable[..., Any], services: Services
) -> None:
    geometry, pointer, words = FAULTS[name]
    first, *others = geometry["outline"]
    document = good("outline")
    document["geometry"] = {**geometry, "outline": [{**first, "side": "held"}, *others]}
    document["meshing"] = {"element": "Q8"}
    document["supports"] = [{"on": "held", "ux": 0, "uy": 0}]
    document["load_cases"] = {"push": [{"on": "held", "shear": 1}]}
    for part in ("cases", "combinations", "requests", "limits"):
        document.pop(part, None)
    answer = post(document)
    assert answer.status_code == 422
    assert answer.mimetype == "application/problem+json"
    problem = answer.get_json()
    fault = problem["errors"][0]
    assert fault["pointer"].startswith(pointer)
    assert re.search(words, fault["message"]), fault["message"]
    assert problem["cautions"]
    assert not services.store.list().records
