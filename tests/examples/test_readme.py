"""README.md is whole: reference, links, examples; test_snippets.py runs what it shows."""

import re
from pathlib import Path

from api.app import create_app
from api.commands import COMMANDS
from api.reference import rewrite
from workers.settings import Settings

ROOT = Path(__file__).resolve().parents[2]
README = ROOT / "README.md"


def test_the_reference_is_that_of_the_schemas_and_rules() -> None:
    """`python -m api.reference README.md` writes it anew."""
    assert rewrite(README.read_text()) == README.read_text()


def test_every_example_says_what_it_is() -> None:
    """In a README; and README.md leads to it."""
    for folder in ROOT.glob("examples/*/"):
        text = (folder / "README.md").read_text()
        assert text.startswith("# ")
        for picture in re.findall(r"!\[.*?\]\((.*?)\)", text):
            assert (folder / picture).read_bytes().startswith(b"\x89PNG")  # ISO/IEC 15948, 5.2
        assert f"(examples/{folder.name}/README.md)" in README.read_text()


def test_every_address_is_in_the_list_of_requests(tmp_path: Path) -> None:
    """What stands around the variable parts of an address, word for word."""
    text = README.read_text()
    rules = create_app(Settings(store=tmp_path)).url_map.iter_rules()
    addresses = {rule.rule for rule in rules if not rule.rule.startswith("/static")}
    assert len(addresses) > 20
    for address in addresses - {"/jobs"}:  # the list on the page for people, anew
        for part in re.split(r"<[^>]+>", address):
            assert part.rpartition("/envelope/")[2] in text, address


def test_every_command_is_told() -> None:
    text = README.read_text()
    assert all(f"`{name}`" in text or f"fishplate {name}" in text for name in COMMANDS)


def test_the_map_has_every_module_of_the_workers() -> None:
    """Of those that stand in no folder of their own."""
    text = (ROOT / "DEVELOPERS.md").read_text()
    chart = text[text.index("## The map") : text.index("## Recipes")]
    modules = {path.name for path in (ROOT / "workers").glob("*.py")} - {"__init__.py"}
    assert modules
    assert [name for name in sorted(modules) if not re.search(rf"\b{name}`", chart)] == []


def test_links_between_pages_lead_somewhere() -> None:
    """Files, and headings of README.md and DEVELOPERS.md."""
    for page in (README, ROOT / "DEVELOPERS.md"):
        text = page.read_text()
        headings = {
            re.sub(r"[^\w\- ]", "", heading.lower()).replace(" ", "-")
            for heading in re.findall(r"^#+ (.*)", text, re.M)
        }
        for target in re.findall(r"\]\(([^)\s]+)\)", text):
            if target.startswith("#"):
                assert target[1:] in headings, target
            elif not target.startswith("http"):
                assert (ROOT / target).exists(), target
