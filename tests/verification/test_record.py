"""The record: what passes, fails or breaks down, and how the page and the command say it."""

from collections.abc import Callable
from html.parser import HTMLParser
from pathlib import Path

import numpy as np
import pytest
from click.testing import CliRunner, Result

from api.commands import main
from workers.analysis import model as model_module
from workers.analysis import plane_stress
from workers.analysis.loads.side import Side
from workers.verification import record as record_module
from workers.verification.benchmark_cases import tapered_panel
from workers.verification.case import Case, Check, Checks, case
from workers.verification.exact_cases import patch_test
from workers.verification.exact_cases import plane_stress as uniform_pull
from workers.verification.page import part, render_page, tolerance
from workers.verification.record import Record, run_case, verify
from workers.verification.statics_cases import equilibrium


@case("Sound", source="<arithmetic>", reason="rounding")
def sound() -> Checks:
    yield Check("one & one", "Q8", 2.0, 1.0 + 1.0, 1e-12)
    yield Check("a poor element", "T3", 2.0, 0.1, None)


@case("Wrong", source="arithmetic", reason="rounding")
def wrong() -> Checks:
    yield Check("one and one", "Q8", 2.0, 2.1, 0.01)


@case("Broken", source="arithmetic", reason="rounding")
def broken() -> Checks:
    yield Check("one and one", "Q8", 2.0, 2.0, 0.01)
    raise ZeroDivisionError("half way")


@case("Idle", source="none", reason="none")
def idle() -> Checks:
    yield from ()


@pytest.fixture
def only(monkeypatch: pytest.MonkeyPatch) -> Callable[..., None]:
    """Let the catalogue hold some cases only."""

    def put(*cases: Case) -> None:
        monkeypatch.setattr(record_module, "CASES", {"Group": cases})

    return put


def record_of(*cases: Case) -> Record:
    return Record(
        verify(lambda _: None, "no such case").when,
        {"system": "test"},
        {"fishplate": "0"},
        tuple(run_case("Group", one) for one in cases),
    )


@pytest.mark.parametrize(
    ("target", "computed", "allowed", "scale", "passed"),
    [
        (100.0, 101.0, 0.01, None, True),
        (100.0, 101.1, 0.01, None, False),
        (-100.0, -98.9, 0.01, None, False),
        (0.0, 0.5, 0.01, 100.0, True),
        (0.0, -1.5, 0.01, 100.0, False),
        (1.0, np.nan, 0.01, None, False),
        (1.0, np.inf, 0.01, None, False),
        (np.float64(1.0), np.float64(1.1), 0.01, None, False),
        (1.0, 5.0, None, None, None),
    ],
)
def test_a_check_passes_within_its_tolerance(target, computed, allowed, scale, passed) -> None:
    assert Check("q", "Q8", target, computed, allowed, scale).passed is passed


def test_what_is_wrong_breaks_down_or_checks_nothing_fails() -> None:
    record = record_of(sound, wrong, broken, idle)
    assert [one.failed for one in record.cases] == [0, 1, 1, 1]
    assert (record.failed, record.passed) == (3, 2)
    troubles = [row.trouble for one in record.cases for row in one.rows if row.trouble]
    assert troubles == ["broke down: ZeroDivisionError: half way", "checked nothing"]


@pytest.mark.parametrize("factor", [1.001, 0.5])
def test_a_wrong_law_does_not_pass(monkeypatch: pytest.MonkeyPatch, factor: float) -> None:
    """A program whose material is a thousandth too stiff must not be verified."""

    def too_stiff(youngs_modulus, poissons_ratio):
        return factor * plane_stress.constitutive(youngs_modulus, poissons_ratio)

    monkeypatch.setattr(model_module, "constitutive", too_stiff)
    assert run_case("", patch_test).failed
    assert run_case("", uniform_pull).failed


def test_a_wrong_load_does_not_pass(monkeypatch: pytest.MonkeyPatch) -> None:
    """Half the side loads: seen by equilibrium and by every benchmark under tractions."""
    whole = Side.nodal
    monkeypatch.setattr(Side, "nodal", lambda self, force: 0.5 * whole(self, force))
    assert run_case("", equilibrium).failed
    assert run_case("", tapered_panel).failed


# --- page ----------------------------------------------------------------------------------------


class Reader(HTMLParser):
    """Collects text and tags; the page must be well-formed and ask for nothing from elsewhere."""

    def __init__(self, page: str) -> None:
        super().__init__()
        self.open: list[str] = []
        self.text: list[str] = []
        self.links: list[str] = []
        self.feed(page)
        assert self.open == []

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        if tag not in ("meta", "link", "img", "br"):
            self.open.append(tag)
        self.links += [f"{tag} {value}" for name, value in attrs if name in ("src", "href")]

    def handle_endtag(self, tag: str) -> None:
        assert self.open.pop() == tag

    def handle_data(self, data: str) -> None:
        self.text.append(data)


def test_the_page_is_whole_and_needs_nothing_from_elsewhere() -> None:
    page = render_page(record_of(sound, wrong, broken))
    reader = Reader(page)
    assert reader.links == []
    text = " ".join("".join(reader.text).split())
    for words in ("one & one", "<arithmetic>", "reported only", "broke down", "+5.00%",
                  "2 checks failed, 2 passed", "do not use this installation",
                  "A qualified engineer must review", "fishplate"):  # fmt: skip
        assert words in text
    assert "//" not in page


def test_a_page_on_which_all_passed_says_so() -> None:
    text = "".join(Reader(render_page(record_of(sound))).text)
    assert "All 1 checks passed." in text


@pytest.mark.parametrize(
    ("check", "words"),
    [
        (Check("q", "Q8", 100.0, 101.5, 0.02), ("+1.50%", "2 %")),
        (Check("q", "Q8", 100.0, 100.0 + 1e-9, 1e-9), ("+1e-11", "1e-09")),
        (Check("q", "Q8", 100.0, 100.0, None), ("0", "reported only")),
        (Check("order", "Q8", 2.0, 2.015, 0.15, scale=1.0), ("+0.0150", "0.15")),
        (Check("q", "Q8", -60.0, -59.5, 0.06, scale=100.0), ("+0.50%", "6 %")),
    ],
)
def test_deviations_are_shown_as_percent_or_difference_or_rounding(
    check: Check, words: tuple
) -> None:
    assert (part(check), tolerance(check)) == words


# --- command -------------------------------------------------------------------------------------


def run(*arguments: str) -> Result:
    return CliRunner().invoke(main, ["verify", *arguments])


def test_the_command_prints_each_case_and_writes_the_page(
    only: Callable[..., None], tmp_path: Path
) -> None:
    only(sound)
    page = tmp_path / "records" / "page.html"
    result = run("--out", str(page))
    assert result.exit_code == 0
    assert "All 1 checks passed." in result.stdout
    assert "qualified engineer" in " ".join(result.stdout.split())
    assert "numpy" in result.stdout
    assert "one &amp; one" in page.read_text(encoding="utf-8")


@pytest.mark.parametrize("bad", [wrong, broken, idle])
def test_the_command_ends_with_one_where_anything_fails(
    only: Callable[..., None], bad: Case, tmp_path: Path
) -> None:
    only(sound, bad)
    result = run("--out", str(tmp_path / "page.html"))
    assert result.exit_code == 1
    assert "FAIL" in result.stdout
    assert "1 check" in (tmp_path / "page.html").read_text(encoding="utf-8")


def test_a_name_that_no_case_has_is_bad_input() -> None:
    assert run("--only", "perpetual motion").exit_code == 2


@pytest.mark.slow
def test_one_case_can_be_run_from_the_command_line() -> None:
    result = run("--only", "tapered")
    assert result.exit_code == 0
    assert " 23.96 " in result.stdout
