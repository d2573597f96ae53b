"""The review sheet: what it says, that it says it safely, and that it stands alone."""

import re
from html.parser import HTMLParser
from pathlib import Path
from typing import Any

import pytest
from PIL import Image, PngImagePlugin

from tests.sheet_samples import HOSTILE, many_cases, small_job, small_results
from workers.cautions import STANDING
from workers.outputs.drawing.page import WINDOW
from workers.outputs.sheet import css_string, evidence_words, render_sheet

VOID = {"meta", "img", "br", "path", "polyline", "polygon", "circle", "link", "input"}


class Page(HTMLParser):
    """The elements of a page, its text, and tags that are not closed in order."""

    def __init__(self, html: str) -> None:
        super().__init__()
        self.elements: list[tuple[str, dict[str, str | None]]] = []
        self.texts: list[str] = []
        self.unbalanced: list[str] = []
        self._open: list[str] = []
        self.feed(html)
        self.close()

    def handle_starttag(self, tag: str, attrs: Any) -> None:
        self.elements.append((tag, dict(attrs)))
        if tag not in VOID:
            self._open.append(tag)

    def handle_startendtag(self, tag: str, attrs: Any) -> None:
        self.elements.append((tag, dict(attrs)))

    def handle_endtag(self, tag: str) -> None:
        if not self._open or self._open.pop() != tag:
            self.unbalanced.append(tag)

    def handle_data(self, data: str) -> None:
        if self._open and self._open[-1] != "style":
            self.texts.append(data)

    def all(self, tag: str) -> list[dict[str, str | None]]:
        return [attributes for name, attributes in self.elements if name == tag]

    @property
    def words(self) -> str:
        """The text with the signs of a keyboard, all white space as single spaces."""
        signs = {"\N{MINUS SIGN}": "-", "\N{MULTIPLICATION SIGN}": "x"}
        return " ".join(" ".join(self.texts).translate(str.maketrans(signs)).split())


@pytest.fixture
def small(tmp_path: Path) -> Page:
    return Page(render_sheet(small_job(), small_results(), tmp_path))


def draw(path: Path, window: str | None = None) -> None:
    path.parent.mkdir(parents=True, exist_ok=True)
    text = PngImagePlugin.PngInfo()
    if window is not None:
        text.add_text(WINDOW, window)
    Image.new("RGB", (16, 12), "white").save(path, pnginfo=text)


def test_the_sheet_is_whole_html(small: Page) -> None:
    assert small.unbalanced == []
    assert small.elements[0] == ("html", {"lang": "en"})


@pytest.mark.parametrize(
    "said",
    [
        "Slipway tie strip",
        "100 MPa between 99.5 and 100.5 MPa in pull at (50, 20) mm",
        "force (32 000, 0) N spread over the side",
        "ux = 0",
        "210 000 MPa",
        "1 x pull",
        "loads against reactions",
        "sha256:0",
        "largest aspect ratio 2.5 10 0",
        "hot-spot stresses",
        "2031-04-05 06:07 UTC",
        "One mesh only",
    ],
)
def test_the_sheet_tells_what_an_engineer_looks_for(small: Page, said: str) -> None:
    assert said.lower() in small.words.lower()


def test_cautions_come_first_and_the_gravest_before_the_others(tmp_path: Path) -> None:
    stop = {"code": "grave", "severity": "stop", "message": "Do not.", "action": "Stop.",
            "evidence": {"value": 412.34, "at": [12.0, 40.0]}}  # fmt: skip
    results = small_results()
    results["cautions"] = [*results["cautions"], stop]
    page = Page(render_sheet(small_job(), results, tmp_path))
    order = [
        page.words.index(text) for text in ("Do not.", "Something was noticed.", "What governs")
    ]
    assert order == sorted(order)
    assert "Stop: the result should not be used as it is" in page.words
    assert "value 412.3 · at (12, 40)" in page.words
    for caution in STANDING:
        assert caution.message in page.words


def test_nothing_comes_from_elsewhere_and_nothing_runs(small: Page) -> None:
    for tag, attributes in small.elements:
        assert tag not in ("script", "link", "iframe", "object", "form")
        assert not [name for name in attributes if name.startswith("on")]
        for name in ("src", "href"):
            assert (attributes.get(name) or "data:").startswith("data:")
    policies = [m["content"] for m in small.all("meta") if m.get("http-equiv")]
    assert policies[0] is not None
    assert policies[0].startswith("default-src 'none'")


def test_names_and_titles_are_text_whatever_they_look_like(tmp_path: Path, small: Page) -> None:
    """The same elements as with a plain title, and the title readable as it was written."""
    results = small_results()
    results["cautions"][0]["message"] = results["cautions"][0]["action"] = HOSTILE
    job = small_job(title=HOSTILE, label=HOSTILE)
    html = render_sheet(job, results, tmp_path)
    page = Page(html)
    assert sum(text.count(HOSTILE) for text in page.texts) >= 5
    assert [tag for tag, _ in page.elements if tag in ("script", "img")] == []
    assert len(page.all("style")) == len(small.all("style"))
    assert html.count("</style>") == 1


def test_text_for_a_style_sheet_is_nothing_but_letters_digits_and_escapes() -> None:
    """CSS syntax (W3C, CSS Syntax 3, 4.3.7): a backslash and six hexadecimal digits."""
    written = css_string('a"; } </style> \n\\ é')
    assert re.fullmatch(r"([A-Za-z0-9]|\\[0-9a-f]{6})*", written)
    back = re.sub(r"\\([0-9a-f]{6})", lambda m: chr(int(m[1], 16)), written)
    assert back[1:-1] == 'a"; } </style> \n\\ é'


def test_pictures_are_in_the_page_with_words_for_those_who_do_not_see_them(tmp_path: Path) -> None:
    for quantity in ("model", "von_mises", "principal_min"):
        draw(tmp_path / "previews" / "pull" / f"{quantity}.png")
    page = Page(render_sheet(small_job(), small_results(), tmp_path))
    images = page.all("img")
    assert len(images) == 3
    for image in images:
        assert (image["src"] or "").startswith("data:image/png;base64,")
        assert (image["width"], image["height"]) == ("16", "12")
        assert len(image["alt"] or "") > 20


def test_of_a_picture_the_part_between_title_and_cautions_is_shown(tmp_path: Path) -> None:
    """Rows 3 to 9 of 12: the window is 16 x 6, with 3 of the 6 hidden rows above it."""
    draw(tmp_path / "previews" / "pull" / "model.png", window="3 9")
    (image,) = Page(render_sheet(small_job(), small_results(), tmp_path)).all("img")
    assert (image["width"], image["height"]) == ("16", "6")
    assert image["style"] == "aspect-ratio: 16 / 6; object-position: 0 50.0%"


def test_what_must_be_decided_has_room_for_initials(tmp_path: Path) -> None:
    results = small_results()
    html = render_sheet(small_job(), results, tmp_path)
    to_decide = [c for c in results["cautions"] if c["severity"] != "note"]
    assert to_decide
    assert html.count('class="answered"') == len(to_decide)


def test_keys_in_a_caution_are_set_as_code_and_nothing_else_is(tmp_path: Path) -> None:
    results = small_results()
    results["cautions"][0]["action"] = "Use `sizes`, <b>not</b> luck."
    html = render_sheet(small_job(), results, tmp_path)
    assert "<em>Use <code>sizes</code>, &lt;b&gt;not&lt;/b&gt; luck.</em>" in html


def test_a_sheet_without_pictures_says_so(tmp_path: Path) -> None:
    results = small_results(pictures={"available": False, "reason": "no libEGL"})
    assert "could not draw: no libEGL" in Page(render_sheet(small_job(), results, tmp_path)).words
    drawn = Page(render_sheet(small_job(), small_results(), tmp_path))
    assert "No pictures were drawn" in drawn.words


def test_every_table_has_a_caption_and_headings_with_scope(small: Page) -> None:
    assert len(small.all("table")) == len(small.all("caption")) > 8
    assert all(heading.get("scope") in ("col", "row", "rowgroup") for heading in small.all("th"))


def test_every_plot_has_a_name(small: Page) -> None:
    plots = [svg for svg in small.all("svg") if svg.get("role") == "img"]
    assert len(plots) == 2
    assert all(len(svg["aria-label"] or "") > 20 for svg in plots)
    assert all(s.get("role") or s.get("aria-hidden") == "true" for s in small.all("svg"))


def test_limits_that_are_not_kept_are_named(tmp_path: Path) -> None:
    use = {"value": 0.8, "yield_strength": 355.0, "at": [0.0, 0.0], "region": "plate"}
    results = small_results()
    results["envelope"]["utilisation"] = {**use, "governs": "pull"}
    for limits, said in (
        ({"factor_on_yield": 1.2, "displacement": 1000}, ("factor 1.25", "reached", "kept")),
        ({"factor_on_yield": 1.3, "displacement": 1}, ("not reached", "exceeded")),
    ):
        words = Page(render_sheet(small_job(limits=limits), results, tmp_path)).words
        assert all(one in words for one in said), said


def test_a_singular_place_that_was_left_out_is_told(tmp_path: Path) -> None:
    results = small_results()
    left_out = {"value": 987.6, "at": [0.0, 40.0], "kind": "re-entrant-corner", "radius": 4.0,
                "exponent": 0.54, "element_size": 2.0, "confirmed": True}  # fmt: skip
    results["envelope"]["von_mises"]["singular"] = left_out
    words = Page(render_sheet(small_job(), results, tmp_path)).words
    assert "at (0, 40) mm (re entrant corner), where the mesh shows 987.6 MPa" in words
    assert "it grew as the mesh was refined" in words


def test_the_record_of_refined_meshes_is_shown(tmp_path: Path) -> None:
    peak = {"values": [90.0, 98.0, 99.6], "at": [[0, 0]] * 3, "sizes": [8.0, 4.0, 2.0],
            "behaviour": "converging", "observed_order": 2.3, "extrapolated": 100.1,
            "uncertainty": 0.6}  # fmt: skip
    meshes = [{"dofs": n, "elements": n // 4, "relative_error": 1 / n, "case": "pull"}
              for n in (40, 160, 640)]  # fmt: skip
    record = {"kind": "adaptive", "target_error": 0.03, "message": "the target error is reached",
              "meshes": meshes, "peaks": {"pull": {"von_mises": peak}}}  # fmt: skip
    page = Page(render_sheet(small_job(), small_results(convergence=record), tmp_path))
    assert "towards 3.0 %, 3 meshes: the target error is reached" in page.words
    assert "von mises converging 2.3 100.1 0.6" in page.words
    assert len(page.all("circle")) == 3


# --- hundreds of cases ---------------------------------------------------------------------------


@pytest.fixture(scope="module")
def many(tmp_path_factory: pytest.TempPathFactory) -> Page:
    return Page(render_sheet(*many_cases(300), tmp_path_factory.mktemp("many")))


def test_of_hundreds_of_cases_those_that_govern_are_told_in_full(many: Page) -> None:
    assert "500 MPa" in many.words
    assert "The 24 of 300 cases and combinations that govern something" in many.words
    assert "the 2 of 300 cases that take part in what governs" in many.words


def test_of_hundreds_of_cases_every_one_has_its_number(many: Page) -> None:
    """Hand sum: 24 in the table of peaks, the other 276 in the list at the end."""
    assert len(many.all("li")) > 276
    for number in range(0, 300, 7):
        assert f"rope {number} " in many.words


def test_of_hundreds_of_cases_extremes_and_plots_stand_for_the_rest(many: Page) -> None:
    """Normal force of case n is n, its reaction -(100 + n), or -500 in case 7."""
    assert "rope 299 299" in many.words  # in the table of the cut
    assert "left x -500 rope 7" in many.words
    assert "left x -100 rope 0" in many.words
    assert any("in cut root" in (svg.get("aria-label") or "") for svg in many.all("svg"))


def test_a_sheet_of_hundreds_of_cases_stays_small(tmp_path: Path) -> None:
    """300 cases of one line take about 100 bytes each beside a sheet that is about 50 kB."""
    assert len(render_sheet(*many_cases(300), tmp_path)) < 250_000


@pytest.mark.parametrize(
    ("evidence", "words"),
    [
        ({"value": 1234.56, "case": "lift"}, "value 1235 · case lift"),
        ({"cases": [f"c{i}" for i in range(9)]}, "cases c0, c1, c2, c3, c4, c5 and 3 more"),
        ({"is_free": True, "parts": {"a": 1}}, "is free True · parts a 1"),
        ({"quantity": "factor_on_yield", "region": "a_b"}, "quantity factor on yield · region a_b"),
    ],
)
def test_evidence_is_put_into_words(evidence: dict[str, Any], words: str) -> None:
    assert evidence_words(evidence) == words
