"""Cases made of factors on load cases, as an object and as a CSV table (RFC 4180)."""

import csv
import io
from typing import Any

import pytest
from apispec import APISpec
from apispec.ext.marshmallow import MarshmallowPlugin
from hypothesis import given
from hypothesis import strategies as st
from jsonschema import Draft202012Validator

from tests.good_documents import good
from tests.job_strategies import NAME
from workers.document.factor_table import read_table
from workers.document.job import JobSchema
from workers.document.read import load, to_document
from workers.errors import DocumentError

PATTERNS = {
    "pull x": [{"on": "end", "total_force": [1, 0]}],
    "pull y": [{"on": "end", "total_force": [0, 1]}],
}
CASES = {"rope 1": {"pull x": 0.8, "pull y": 0.6}, "rope 2": {"pull y": -300.0}}


def document(**parts: Any) -> dict[str, Any]:
    return {**good("patches"), "load_cases": PATTERNS, **parts}


def faults(**parts: Any) -> list[tuple[str, str]]:
    with pytest.raises(DocumentError) as caught:
        load(document(**parts))
    return [(fault.pointer, fault.message) for fault in caught.value.faults]


def factors(job: Any) -> dict[str, dict[str, float]]:
    return {case.name: dict(case.factors) for case in job.cases}


def test_factors_are_read_by_case() -> None:
    job = load(document(cases=CASES))
    assert factors(job) == CASES
    assert [case.name for case in job.load_cases] == list(PATTERNS)
    assert [case.pointer for case in job.cases] == ["/cases/rope 1", "/cases/rope 2"]


@pytest.mark.parametrize(
    "text",
    [
        "case,pull x,pull y\nrope 1,0.8,0.6\nrope 2,,-3e2\n",
        "case,pull x,pull y\r\nrope 1,0.8,0.6\r\nrope 2,,-3e2",  # RFC 4180, 2.1 and 2.2
        '"case","pull x","pull y"\n"rope 1","0.8","0.6"\n"rope 2","","-300"\n',  # 2.5
        "\ufeffname, pull x,pull y\n".replace(", ", ",") + "rope 1, +0.8 ,.6\n\nrope 2,,-300\n",
        "case,pull y,pull x\nrope 1,0.6,0.8\nrope 2,-300,\n",
    ],
    ids=[
        "plain",
        "CRLF, no last line break",
        "quoted",
        "byte order mark, blanks",
        "columns turned",
    ],
)
def test_a_table_says_the_same_as_the_object(text: str) -> None:
    assert factors(load(document(cases=text))) == CASES


def test_a_name_with_commas_and_quotes_is_quoted() -> None:
    """RFC 4180, 2.6: a comma inside quotes belongs to the name."""
    assert list(read_table('case,pull x\n"rope 1, taut",1\n').cases) == ["rope 1, taut"]


@given(
    st.dictionaries(
        NAME, st.dictionaries(NAME, st.floats(-1e12, 1e12), min_size=1, max_size=3),
        min_size=1, max_size=4,
    )
)  # fmt: skip
def test_what_the_standard_library_writes_is_read_back(cases: dict[str, dict[str, float]]) -> None:
    """Oracle: Python's own CSV writer."""
    patterns = list(dict.fromkeys(name for given in cases.values() for name in given))
    text = io.StringIO(newline="")
    writer = csv.writer(text)
    writer.writerow(["case", *patterns])
    for name, given_factors in cases.items():
        writer.writerow([name, *(given_factors.get(pattern, "") for pattern in patterns)])
    table = read_table(text.getvalue())
    assert table.faults == []
    assert table.cases == cases


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("", "line 1 must be a heading"),
        ("case;pull x\nrope 1;1\n", "line 1 must be a heading|commas"),
        ("case,pull x\n", "needs a line for each case"),
        ("case,pull z\nrope 1,1\n", 'line 1, column 2: there is no load case named "pull z"'),
        ("case,pull x,pull x\nrope 1,1,1\n", 'line 1, column 3: "pull x" is already column 2'),
        ("case,pull x,\nrope 1,1,1\n", "line 1, column 3: the name of a load case is missing"),
        ("pull x,pull y\n1,2\n", 'line 1, column 1: "pull x" is a load case'),
        ("case,pull x\nrope 1\n", "line 2 has 1 columns; the heading has 2"),
        ("case,pull x\nrope 1,1,2\n", "line 2 has 3 columns; the heading has 2"),
        ("case,pull x\n\n.rope,1\n", 'line 3, column 1: ".rope" is not a name'),
        ("case,pull x\na,1\na,2\n", 'line 3, column 1: "a" stands in line 2 already'),
        ("case,pull x\na,one\n", 'line 2, column 2 (pull x): "one" is not a finite number'),
        ('case,pull x\na,"1,5"\n', 'line 2, column 2 (pull x): "1,5" is not a finite number'),
        ("case,pull x\na,nan\n", '"nan" is not a finite number'),
        ("case,pull x\na,1e999\n", '"1e999" is not a finite number'),
        ("case,pull x\na,1_0\n", '"1_0" is not a finite number'),
        ("case,pull x\na,=1+1\n", '"=1+1" is not a finite number'),
        ("case,pull x\na,\n", 'line 2: "a" has no factor'),
        ('case,pull x\na,"1\n', "line 2 is not CSV"),
        ('case,pull x\na,"1"2\n', "line 2 is not CSV"),
    ],
)
def test_a_faulty_table_names_line_and_column(text: str, words: str) -> None:
    ((place, message),) = faults(cases=text)
    assert place == "/cases"
    for word in words.split("|"):
        assert word in message


def test_a_line_break_inside_quotes_does_not_shift_the_lines() -> None:
    text = 'case,pull x\n"a\nb",1\nc,x\n'
    assert [message.split(",")[0] for _, message in faults(cases=text)] == ["line 2", "line 4"]


def test_all_faults_of_a_table_come_together() -> None:
    text = "case,pull x\na,x\nb\nc,y\n"
    assert [message.split(",")[0].split(" has")[0] for _, message in faults(cases=text)] == [
        "line 2", "line 3", "line 4",
    ]  # fmt: skip


def test_unknown_load_cases_of_the_object_are_named_in_their_places() -> None:
    ((place, message),) = faults(cases={"rope 1": {"pull z": 1}})
    assert place == "/cases/rope 1/pull z"
    assert "pull x, pull y" in message


@pytest.mark.parametrize("cases", [{}, {"rope 1": {}}, {"rope 1": 3}, 3, None, ["rope 1"]])
def test_other_forms_are_refused(cases: Any) -> None:
    assert faults(cases=cases)[0][0].startswith("/cases")


@pytest.mark.parametrize("cases", [CASES, "case,pull x\nrope 1,1\nrope 2,1\n"])
def test_combinations_are_of_these_cases(cases: Any) -> None:
    job = load(document(cases=cases, combinations={"both": {"rope 1": 1, "rope 2": 2}}))
    assert dict(job.combinations[0].factors) == {"rope 1": 1.0, "rope 2": 2.0}
    ((place, _),) = faults(cases=cases, combinations={"both": {"pull x": 1}})
    assert place == "/combinations/both/pull x"
    ((place, message),) = faults(cases=cases, combinations={"rope 1": {"rope 1": 1}})
    assert (place, message) == ("/combinations/rope 1", '"rope 1" is already the name of a case')


def test_a_case_may_have_the_name_of_its_pattern() -> None:
    job = load(document(cases={"pull x": {"pull x": 2}}, combinations={"c": {"pull x": 1}}))
    assert factors(job) == {"pull x": {"pull x": 2.0}}


def test_a_prescribed_displacement_needs_the_load_case_whose_factor_it_takes() -> None:
    moved = {"on": "wall", "ux": "1 mm", "uy": 0}
    ((place, message),) = faults(cases=CASES, supports=[moved])
    assert place == "/supports/0/ux"
    assert "case" in message
    load(document(cases=CASES, supports=[{**moved, "case": "pull x"}]))
    load(document(supports=[moved]))


def test_a_table_is_written_as_an_object() -> None:
    text = "case,pull x,pull y\nrope 1,0.8,0.6\nrope 2,,-300\n"
    assert to_document(load(document(cases=text)))["cases"] == CASES


@pytest.mark.parametrize("cases", [CASES, "case,pull x\nrope 1,1\n"])
def test_both_forms_are_valid_by_the_published_schema(cases: Any) -> None:
    """Oracle: a general JSON Schema validator."""
    spec = APISpec("jobs", "1", "3.1.0", plugins=[MarshmallowPlugin()])
    spec.components.schema("Job", schema=JobSchema)
    schema = {
        "$ref": "#/components/schemas/Job",
        "components": spec.to_dict()["components"],
    }
    validator = Draft202012Validator(schema)
    assert list(validator.iter_errors(document(cases=cases))) == []
    assert list(validator.iter_errors(document(cases=3))) != []
    assert list(validator.iter_errors(document(cases={"rope 1": {"pull x": "1"}}))) != []


# --- which field files are wanted ----------------------------------------------------------------


@pytest.mark.parametrize("wanted", ["all", "envelope", ["pull x", "both"]])
def test_field_files_are_chosen_by_word_or_name(wanted: Any) -> None:
    parts = {"requests": {"fields": wanted}, "combinations": {"both": {"pull x": 1}}}
    job = load(document(**parts))
    assert job.requests.field_files == (wanted if isinstance(wanted, str) else tuple(wanted))
    assert to_document(job)["requests"] == {"fields": wanted}


@pytest.mark.parametrize("wanted", ["none", 3, None, {}, [], [3]])
def test_other_choices_of_field_files_are_refused(wanted: Any) -> None:
    assert faults(requests={"fields": wanted})[0][0].startswith("/requests/fields")


def test_field_files_of_unknown_states_are_named() -> None:
    ((place, message),) = faults(requests={"fields": ["pull x", "pull z"]})
    assert place == "/requests/fields/1"
    assert "pull z" in message
