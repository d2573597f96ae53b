"""The review as a whole: silence on a sound job, order, standing notes, broken rules, catalogue."""

import subprocess
import sys
from collections import Counter
from dataclasses import replace

import orjson
import pytest

from tests.reviewed import raised, sound_job, sound_mesh, sound_results, steel, stressed
from workers.cautions import SEVERITIES, STANDING
from workers.review import review as review_module
from workers.review.catalogue import RULES, catalogue
from workers.review.review import review
from workers.review.rule import finding, rule


def test_a_sound_job_raises_only_the_two_standing_notes() -> None:
    cautions = review(sound_job(), sound_mesh(), sound_results())
    assert cautions == list(STANDING)
    assert len(cautions) == 2


def test_a_job_that_is_not_solved_yet_is_reviewed_for_what_can_be_known() -> None:
    assert raised(results={}) == {}
    codes = raised(sound_job(materials=steel(yield_strength=None)), results={})
    assert set(codes) == {"no-yield-strength"}


def test_the_gravest_cautions_come_first_and_the_standing_ones_last() -> None:
    job = sound_job(materials=steel(poissons_ratio=0.495))
    found = review(job, sound_mesh(), sound_results({"pull": stressed(400.0)}))
    grades = [list(SEVERITIES).index(caution.severity) for caution in found]
    assert grades == sorted(grades)
    assert found[0].code in {"yield-exceeded", "limit-exceeded"}
    assert tuple(found[-2:]) == STANDING


def test_cautions_are_ready_for_json() -> None:
    job = sound_job(materials=steel(poissons_ratio=0.495), plate=replace(sound_job().plate,
                    thickness=60.0))  # fmt: skip
    found = review(job, sound_mesh(), sound_results({"pull": stressed(400.0)}))
    assert len(found) > 4
    for caution in found:
        assert orjson.loads(orjson.dumps(caution.as_json())) == caution.as_json()


def test_a_rule_that_breaks_down_is_reported_and_does_not_stop_the_others(
    monkeypatch: pytest.MonkeyPatch,
) -> None:
    @rule("always-broken", "note", title="Broken", looks_at="nothing", action="none")
    def broken(context):
        yield finding("so far so good")
        raise ZeroDivisionError("a spoilt rule")

    monkeypatch.setattr(review_module, "RULES", (broken, *RULES))
    codes = raised(results=sound_results({"pull": stressed(400.0)}))
    assert codes["review-incomplete"][0].evidence == {"rule": "always-broken"}
    assert "a spoilt rule" in codes["review-incomplete"][0].message
    assert "yield-exceeded" in codes
    assert "always-broken" not in codes


def test_every_code_of_the_catalogue_stands_for_one_rule_with_words_for_the_reader() -> None:
    entries = catalogue()
    assert not [code for code, n in Counter(e["code"] for e in entries).items() if n > 1]
    assert {caution.code for caution in STANDING} <= {entry["code"] for entry in entries}
    for entry in entries:
        assert set(entry) == {"code", "severity", "title", "looks_at", "action"}
        assert entry["severity"] in SEVERITIES
        assert all(len(text) > 3 for text in entry.values())


def test_the_catalogue_loads_neither_solver_nor_mesher_nor_renderer() -> None:
    """The API process lists the rules; in a fresh interpreter, since this one has loaded much."""
    program = (
        "import sys, workers.review.catalogue\n"
        "print([m for m in ('scipy', 'vtkmodules', 'netgen', 'pymetis') if m in sys.modules])"
    )
    done = subprocess.run(
        [sys.executable, "-c", program], capture_output=True, text=True, check=True, timeout=60
    )
    assert done.stdout.strip() == "[]"
