"""Title, footer and labels: everything said, nothing on top of anything else."""

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from PIL import Image

from workers.cautions import STANDING, Caution
from workers.outputs.drawing.canvas import MISSING, Canvas, printable
from workers.outputs.drawing.labels import Label, Labels
from workers.outputs.drawing.page import (
    FOOTER_LINES,
    HEIGHT,
    LABEL_SIZE,
    SMALL_SIZE,
    WIDTH,
    Page,
    footer_rows,
)
from workers.outputs.drawing.palette import INK
from workers.outputs.drawing.view import Box, View


def caution(code: str, severity: str, message: str = "Something to decide.") -> Caution:
    return Caution(code, severity, message, "Decide.")


MANY = [
    caution("note-a", "note"),
    caution("check-a", "check", "A long message about a stress that grows " * 5),
    caution("stop-a", "stop"),
    *[caution(f"check-{n}", "check") for n in range(4)],
    *STANDING,
]


def test_the_worst_caution_comes_first_and_the_standing_notes_are_always_there():
    rows = footer_rows(Canvas(WIDTH, HEIGHT), MANY)
    severities = [row.severity for row in rows if row.code]
    assert severities == sorted(severities, key=["stop", "check", "note"].index)
    assert [row.code for row in rows][-len(STANDING) :] == [c.code for c in STANDING]
    without = footer_rows(Canvas(WIDTH, HEIGHT), [])
    assert [row.code for row in without] == [c.code for c in STANDING]


def test_capitals_are_two_millimetres_high_at_half_an_a4_page():
    """The page is then 184 mm wide; 1.8 to 2.5 mm are common practice for drawings."""
    canvas = Canvas(WIDTH, HEIGHT)
    canvas.text((100, 100), "H", SMALL_SIZE, colour=INK)
    rows = np.flatnonzero((canvas.pixels()[..., 3] > 120).any(axis=1))
    assert (rows[-1] - rows[0] + 1) * 184 / WIDTH >= 2.0
    assert SMALL_SIZE < LABEL_SIZE


def test_standing_notes_are_set_in_full():
    for row, note in zip(footer_rows(Canvas(WIDTH, HEIGHT), []), STANDING, strict=True):
        assert " ".join(row.lines) == note.message


@pytest.mark.parametrize("count", [1, 6, 9, 30])
def test_every_caution_is_at_least_named_and_the_footer_keeps_its_size(count):
    raised = [
        caution(f"code-{n}", "check", "A stress that grows without end " * 6) for n in range(count)
    ]
    rows = footer_rows(Canvas(WIDTH, HEIGHT), [*raised, *STANDING])
    assert sum(len(row.lines) for row in rows) <= FOOTER_LINES
    said = " ".join(row.code + " " + " ".join(row.lines) for row in rows)
    named = [c for c in raised if c.code in said]
    assert (
        len(named) == count
        or f"and {count - len([r for r in rows if 'code-' in r.code])} more" in said
    )


@given(st.text(alphabet="abc defgh ij", min_size=1, max_size=300), st.integers(1, 3))
@settings(max_examples=40, deadline=None)
def test_wrapped_text_stays_inside_its_width_and_keeps_its_words(text, lines):
    canvas = Canvas(64, 64)
    found = canvas.wrap(text, 26, 700, lines)
    assert len(found) <= lines
    assert all(canvas.measure(line, 26)[0] <= 700 for line in found)
    shown = " ".join(found)
    assert shown == " ".join(text.split()) or shown.endswith("…")


def test_characters_that_the_font_lacks_become_boxes_and_line_breaks_blanks():
    kept = "\N{GREEK SMALL LETTER SIGMA} ≤ 2·τ, Größe, подъём"
    assert printable(kept) == kept
    assert printable("a\nb\t船") == f"a b {MISSING}"


def test_a_title_of_200_characters_is_set_whole():
    title = "Cradle web " * 18
    page = Page(title[:200], "lift", STANDING)
    assert page.drawing.height > 600
    ink = page.pixels()[: HEIGHT - int(page.drawing.top)].min(axis=2) < 128
    assert ink[:, : WIDTH - 44].any()
    assert not ink[:, WIDTH - 44 :].any()  # nothing runs over the margin


def test_the_footer_shows_the_colour_of_the_severity():
    def tag_pixels(severity: str) -> np.ndarray:
        return Page("t", "s", [caution("x", severity), *STANDING]).pixels()[-220:, 44:136]

    red = (tag_pixels("stop")[..., 0].astype(int) - tag_pixels("stop")[..., 1] > 90).sum()
    assert red > 800
    assert (tag_pixels("note")[..., 0].astype(int) - tag_pixels("note")[..., 1] > 90).sum() == 0


def test_title_facts_and_cautions_are_in_the_file_as_text(tmp_path):
    path = tmp_path / "a.png"
    Page("Lug, revision β", "lift", MANY).save(path, {"Case": "lift", "Quantity": "model"})
    with Image.open(path) as image:
        text = image.text
        assert image.size == (WIDTH, HEIGHT)
    assert (text["Title"], text["Case"], text["Quantity"]) == ("Lug, revision β", "lift", "model")
    for one in MANY:
        assert one.code in text["Cautions"]
        assert one.message in text["Cautions"]


# --- labels --------------------------------------------------------------------------------------


def overlap(a: Box, b: Box) -> bool:
    return a.left < b.right and b.left < a.right and a.bottom < b.top and b.bottom < a.top


PAPER = np.full((HEIGHT, WIDTH, 3), 255, np.uint8)
ROOM = Box(40, 150, 1560, 1050)


@given(st.lists(st.tuples(st.floats(60, 1540), st.floats(170, 1030)), min_size=2, max_size=9))
@settings(max_examples=15, deadline=None)
def test_labels_keep_off_each_other_and_inside_their_room(anchors):
    labels = Labels(Canvas(WIDTH, HEIGHT), ROOM, PAPER)
    boxes = [
        labels.place(Label(np.array(at), [[f"support {number}: fixed"]]))
        for number, at in enumerate(anchors)
    ]
    for number, box in enumerate(boxes):
        assert ROOM.left <= box.left
        assert box.right <= ROOM.right
        assert ROOM.bottom <= box.bottom
        assert box.top <= ROOM.top
        assert not any(overlap(box, other) for other in boxes[:number])


def test_a_label_avoids_what_is_drawn_and_rather_goes_where_it_is_asked():
    canvas = Canvas(WIDTH, HEIGHT)
    canvas.box((500, 400), (1500, 900), "black")
    at = np.array([800.0, 380.0])
    below = Labels(canvas, ROOM, PAPER).place(Label(at, [["base"]], toward=np.array([0.0, 1.0])))
    assert below.top < 400
    free = Canvas(WIDTH, HEIGHT)
    above = Labels(free, ROOM, PAPER).place(Label(at, [["base"]], toward=np.array([0.0, 1.0])))
    assert above.bottom > 380


def test_a_label_takes_the_layout_that_fits():
    room = Box(40, 150, 300, 1050)
    label = Label(
        np.array([60.0, 600.0]), [["a long line of text for a label"], ["a long line", "of text"]]
    )
    box = Labels(Canvas(WIDTH, HEIGHT), room, PAPER).place(label)
    assert box.height > 50  # two lines


# --- the view ------------------------------------------------------------------------------------


@given(
    st.tuples(st.floats(-1e4, 1e4), st.floats(-1e4, 1e4)),
    st.tuples(st.floats(1e-3, 1e4), st.floats(1e-3, 1e4)),
)
def test_a_view_shows_the_whole_plate_as_large_as_it_can_be(low, extent):
    box = Box(100, 200, 900, 700)
    low, extent = np.array(low), np.array(extent)
    view = View.fit(low, low + extent, box)
    (left, bottom), (right, top) = view.pixels(low), view.pixels(low + extent)
    assert box.left - 1e-3 <= left
    assert right <= box.right + 1e-3
    assert box.bottom - 1e-3 <= bottom
    assert top <= box.top + 1e-3
    full = (right - left) / box.width, (top - bottom) / box.height
    assert max(full) == pytest.approx(1, abs=1e-5)
    assert view.position(view.pixels(low)) == pytest.approx(low, abs=1e-6 * (1 + abs(low).max()))
