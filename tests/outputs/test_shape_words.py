"""The shape of a plate in words: every corner, arc, round and hole that the document gives."""

from typing import Any

import pytest

from tests.good_documents import good
from workers.document.read import load
from workers.outputs.shape_words import MOST_CORNERS, MOST_ROWS, shape_rows

ISOLATES = dict.fromkeys(map(ord, "\N{FIRST STRONG ISOLATE}\N{POP DIRECTIONAL ISOLATE}"))


def told(document: Any) -> dict[str, str]:
    return {name: words.translate(ISOLATES) for name, words in shape_rows(load(document))}


@pytest.mark.parametrize(
    ("part", "words"),
    [
        ("outline", "(0, 0) \N{EN DASH}base→ (160, 0) R 8 \N{EN DASH}right→ (160, 90)"),
        ("outline", "\N{EN DASH}crown, arc through (80, 170)→ (0, 90)"),
        ("pin", "circle ⌀ 50 about (80, 90)"),
        ("slot", "(20, 20) \N{EN DASH}slot low→ (30, 20) → (30, 30) → back"),
        ("boss", "circle ⌀ 90 about (80, 90)"),
        ("tip", "point (80, 170)"),
    ],
)
def test_an_outline_is_told_corner_by_corner(part: str, words: str) -> None:
    assert words in told(good("outline"))[part]


def test_patches_are_told_by_their_corners_and_a_mesh_not_at_all() -> None:
    assert all("corners (" in words or "point" in words for words in told(good("patches")).values())
    assert told(good("mesh")) == {}


def test_what_is_too_long_for_a_sheet_is_cut_and_counted() -> None:
    document = good("outline")
    hole = {"outline": [{"at": [100 + n, 30 + n * n / 99]} for n in range(MOST_CORNERS + 5)]}
    document["geometry"]["holes"].append({"name": "long", **hole})
    points = document["geometry"]["points"]
    points |= {f"p{n}": [1, 1 + n] for n in range(MOST_ROWS)}
    rows = told(document)
    assert rows["long"].endswith("and 5 more corners")
    assert len(rows) == MOST_ROWS + 1
    assert "more, in the job document" in rows[""]
