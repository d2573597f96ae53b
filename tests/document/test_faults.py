"""All faults of one document at once: in document order, each once, and not without end."""

import json
from typing import Any

import pytest

from tests.good_documents import good
from workers.document.read import load, read_document
from workers.errors import DocumentError, Fault


def faults_of(document: Any) -> tuple[Fault, ...]:
    with pytest.raises(DocumentError) as caught:
        load(document)
    return caught.value.faults


def test_faults_of_form_names_and_sense_come_together_in_document_order() -> None:
    document = good("outline")
    document["units"]["force"] = "ton"
    document["materials"]["steel"]["poissons_ratio"] = 0.7
    del document["materials"]["steel"]["density"]
    document["geometry"]["holes"][1]["name"] = "pin"
    document["supports"][0]["on"] = "bsae"
    document["load_cases"]["wind"][3] = {"on": "tip", "pressure": "3 kg"}
    document["combinations"]["lift x 1.5"]["lft"] = 2
    document["requests"]["lines"]["net section"]["points"] = 1
    document["limit"] = {}
    assert [fault.pointer for fault in faults_of(document)] == [
        "/units/force",
        "/materials/steel/poissons_ratio",
        "/materials/steel/density",
        "/geometry/holes/1/name",
        "/supports/0/on",
        "/load_cases/wind/3/on",
        "/load_cases/wind/3/pressure",
        "/load_cases/wind/4/on",  # "slot" is no name any more
        "/combinations/lift x 1.5/lft",
        "/requests/lines/net section/points",
        "/limit",
    ]


def test_an_empty_document_lists_every_required_section() -> None:
    assert [(fault.pointer, fault.message) for fault in faults_of({})] == [
        (f"/{section}", "is required")
        for section in (
            "geometry", "load_cases", "materials", "plate", "supports", "title", "units",
        )
    ]  # fmt: skip


@pytest.mark.parametrize("document", [None, [], "job", 3, True])
def test_a_document_that_is_no_object_is_one_fault(document: Any) -> None:
    (fault,) = faults_of(document)
    assert fault.pointer == ""
    assert "must be an object" in fault.message


def test_the_same_document_gives_the_same_faults_in_the_same_order() -> None:
    document = good("mesh")
    document.update({f"unknown {number}": number for number in range(20)})
    data = json.dumps(document).encode()
    texts = set()
    for _ in range(3):
        with pytest.raises(DocumentError) as caught:
            read_document(data)
        texts.add(str(caught.value))
    assert len(texts) == 1


def test_thousands_of_faults_are_cut_short() -> None:
    document = good("outline")
    document["load_cases"]["many"] = [{"on": f"side {n}", "pressure": -n} for n in range(3000)]
    first, *others = faults_of(document)
    assert first.pointer == ""
    assert "there may be more" in first.message
    assert len(others) == 1000


def test_a_hundred_thousand_unknown_keys_are_sorted_before_the_list_is_cut() -> None:
    document = good("mesh")
    document["plate"].update({f"key {number}": 0 for number in range(100_000)})
    assert [fault.pointer for fault in faults_of(document)[1:4]] == [
        "/plate/key 0", "/plate/key 1", "/plate/key 2",
    ]  # fmt: skip


def test_thousands_of_bad_nodes_are_a_few_faults() -> None:
    document = good("mesh")
    document["geometry"]["mesh"]["nodes"] += [[0, None]] * 30_000
    faults = faults_of(document)
    assert len(faults) == 21
    assert faults[0].pointer == "/geometry/mesh/nodes"
    assert faults[1].pointer == "/geometry/mesh/nodes/7/1"
    assert "more entries" in faults[0].message


def test_pointers_are_escaped() -> None:
    """RFC 6901, section 3: ~ is written ~0 and / is written ~1."""
    document = good("mesh")
    document["materials"]["a/b~c"] = 1
    assert [fault.pointer for fault in faults_of(document)] == ["/materials/a~1b~0c"]


def test_entries_named_like_internal_keys_keep_their_places() -> None:
    document = good("mesh")
    document["materials"]["_schema"] = {"youngs_modulus": 1, "poissons_ratio": 9}
    document["load_cases"]["_schema"] = 3
    assert [fault.pointer for fault in faults_of(document)] == [
        "/materials/_schema/poissons_ratio",
        "/load_cases/_schema",
    ]


def test_a_message_shows_a_long_value_cut_short() -> None:
    document = good("mesh")
    document["plate"]["thickness"] = "x" * 10_000
    (fault,) = faults_of(document)
    assert len(fault.message) < 250
