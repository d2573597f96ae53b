"""The review sheet of the example lug in a browser: at a desk, on a phone, on paper."""

import re
from pathlib import Path

import pytest

from tests.browser import LOW_CONTRAST, OVERFLOW, Browser, page_count
from tests.sheet_samples import HOSTILE, many_cases, small_job, small_results
from workers import pipeline
from workers.outputs.drawing.page import LABEL_SIZE, WIDTH
from workers.outputs.sheet import render_sheet

pytestmark = pytest.mark.slow

LUG = Path(__file__).parents[2] / "examples" / "lug" / "job.json"
DESK, PHONE = 1400, 390  # CSS pixels
LONG_NAME = "W" * 80


@pytest.fixture(scope="module")
def sheets(tmp_path_factory: pytest.TempPathFactory, rendering: None) -> dict[str, str]:
    """Addresses of sheets: the lug's with its pictures, one of 300 cases, one of bad manners."""
    folder = tmp_path_factory.mktemp("sheets")
    (folder / "lug").mkdir()
    pipeline.run(LUG.read_bytes(), folder / "lug")
    written = {"many": render_sheet(*many_cases(300), folder)}
    results = small_results()
    results["cautions"][0]["message"] = f"{HOSTILE} {LONG_NAME}"
    job = small_job(title=f"{HOSTILE} {LONG_NAME}", label=LONG_NAME)
    written["hostile"] = render_sheet(job, results, folder)
    for name, html in written.items():
        (folder / name).mkdir()
        (folder / name / "sheet.html").write_text(html, encoding="utf-8")
    return {n: (folder / n / "sheet.html").as_uri() for n in ("lug", "many", "hostile")}


@pytest.mark.parametrize("name", ["lug", "many", "hostile"])
@pytest.mark.parametrize("width", [DESK, PHONE])
def test_nothing_sticks_out_of_the_window(
    chromium: Browser, sheets: dict[str, str], name: str, width: int
) -> None:
    page = chromium.open(sheets[name], width)
    assert page.evaluate(OVERFLOW) == []
    assert page.evaluate("document.documentElement.scrollWidth") <= width


@pytest.mark.parametrize("name", ["lug", "many", "hostile"])
def test_nothing_sticks_out_of_the_paper(
    chromium: Browser, sheets: dict[str, str], name: str
) -> None:
    page = chromium.open(sheets[name], DESK)
    page.as_on_paper()
    assert page.evaluate(OVERFLOW) == []


@pytest.mark.parametrize("name", ["lug", "hostile"])
def test_text_stands_out_from_what_is_behind_it(
    chromium: Browser, sheets: dict[str, str], name: str
) -> None:
    """At least 4.5 to 1, large text 3 to 1, as WCAG 2.2 asks at level AA."""
    found = chromium.open(sheets[name], DESK).evaluate(LOW_CONTRAST)
    assert found["low"] == []
    assert found["seen"] > 100


def test_the_checks_of_this_module_can_fail(chromium: Browser, tmp_path: Path) -> None:
    """Grey #999 on white has a contrast of 2.85 to 1 by the formula of WCAG."""
    path = tmp_path / "bad.html"
    path.write_text(
        "<meta name=viewport content=width=device-width><p style='color:#999'>pale</p>"
        "<div style='width:500px'>wide</div>"
    )
    page = chromium.open(path.as_uri(), PHONE)
    assert page.evaluate(LOW_CONTRAST)["low"] == ["2.85 pale"]
    assert len(page.evaluate(OVERFLOW)) == 1


@pytest.mark.parametrize("name", ["lug", "hostile"])
def test_nothing_is_asked_from_anywhere(
    chromium: Browser, sheets: dict[str, str], name: str
) -> None:
    """Only the page itself, and pictures that are in it."""
    page = chromium.open(sheets[name], DESK)
    asked = [address for address in page.requests if not address.startswith("data:image/png")]
    assert asked == [sheets[name]]
    assert page.evaluate("document.scripts.length") == 0


def test_all_pictures_are_shown(chromium: Browser, sheets: dict[str, str]) -> None:
    page = chromium.open(sheets["lug"], DESK)
    assert page.evaluate("[...document.images].map(i => i.naturalWidth)") == [1600] * 5


def test_letters_in_pictures_are_two_millimetres_high_on_paper(
    chromium: Browser, sheets: dict[str, str]
) -> None:
    """Capitals are 0.729 of the size of the type in DejaVu Sans."""
    page = chromium.open(sheets["lug"], DESK)
    page.as_on_paper()
    widths = page.evaluate("[...document.images].map(i => i.getBoundingClientRect().width)")
    shown = [width / WIDTH * LABEL_SIZE * 0.729 * 25.4 / 96 for width in widths]
    assert min(shown) >= 2.0


def test_assistive_programs_find_landmarks_headings_and_names(
    chromium: Browser, sheets: dict[str, str]
) -> None:
    roles = chromium.open(sheets["lug"], DESK).roles()
    for landmark in ("banner", "main", "contentinfo"):
        assert [role for role, _ in roles].count(landmark) == 1
    for role in ("region", "image", "heading", "table"):
        named = [name for found, name in roles if found == role]
        assert len(named) > 4
        assert all(named), role


def test_the_lug_is_filed_on_a_few_pages(chromium: Browser, sheets: dict[str, str]) -> None:
    """Five: each picture has up to half a page, so that its letters are 2 mm high."""
    pdf = chromium.open(sheets["lug"], DESK).pdf()
    assert 2 <= page_count(pdf) <= 5
    sizes = {tuple(map(round, map(float, box.split()))) for box in
             re.findall(rb"/MediaBox\s*\[([^\]]+)\]", pdf)}  # fmt: skip
    assert sizes == {(0, 0, 595, 842)}  # A4 in points, ISO 216


def test_hundreds_of_cases_fit_a_few_pages(chromium: Browser, sheets: dict[str, str]) -> None:
    assert page_count(chromium.open(sheets["many"], DESK).pdf()) <= 7
