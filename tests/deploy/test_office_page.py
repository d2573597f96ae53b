"""deploy/OFFICE.md names what there is: commands, files, units, settings, measures, routes."""

import re
import shlex
import subprocess
from pathlib import Path

import pytest

from api.app import create_app
from tests.command_line import parse
from workers.setting_table import rows
from workers.settings import Settings

ROOT = Path(__file__).resolve().parent.parent.parent
HOSTING = ROOT / "deploy" / "hosting"
PAGE = (ROOT / "deploy" / "OFFICE.md").read_text()
BLOCKS = re.findall(r"^```sh\n(.*?)^```", PAGE, re.MULTILINE | re.DOTALL)
INLINE = re.findall(
    r"`([^`\n]+)`", re.sub(r"^```.*?^```", "", PAGE, flags=re.MULTILINE | re.DOTALL)
)
LINES = [line for block in BLOCKS for line in block.splitlines()]
# How the command is called: as it is, as a user, within compose.
CALL = re.compile(
    r"(?:^|-- |timeout \d+ )(?:/opt/fishplate/\.venv/bin/)?fishplate (.*)|run --rm (api .*)"
)
OF_DEBIAN = {"redis-server", "redis-server@fishplate", "nginx"}


def commands() -> list[str]:
    """What follows `fishplate` wherever the page has it."""
    found = [match[1] or match[2].removeprefix("api ") for t in [*LINES, *INLINE]
             if (match := CALL.search(t))]  # fmt: skip
    return list(dict.fromkeys(re.sub(r" \|\|.*", "", text) for text in found))


@pytest.mark.parametrize("text", commands())
def test_the_command_line_understands(
    text: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.chdir(ROOT)  # where the example is
    parse(shlex.split(text.replace("/var/backups/fishplate", str(tmp_path))))


def test_the_page_has_the_commands_that_an_operator_needs() -> None:
    named = {text.split()[0] for text in commands()}
    assert named >= {"tokens", "restore", "migrate", "verify", "submit", "serve"}


@pytest.mark.parametrize("block", BLOCKS, ids=lambda block: block.split("\n")[0][:40])
def test_a_block_is_shell(block: str) -> None:
    checked = subprocess.run(
        ["bash", "-n"], input=block, capture_output=True, text=True, check=False
    )
    assert (checked.returncode, checked.stderr) == (0, "")


def test_files_that_are_installed_exist() -> None:
    named = re.findall(r"deploy/[a-zA-Z0-9_./*-]*[a-zA-Z0-9]", "\n".join(LINES + INLINE))
    assert len(named) > 5
    for path in named:
        assert list(ROOT.glob(path)), path
    for file in HOSTING.iterdir():  # and none is forgotten
        covered = any(file in ROOT.glob(path) for path in named)
        assert covered or file.name == "Dockerfile", file.name  # which the compose file names


def test_units_exist() -> None:
    named = {
        word.strip()
        for text in [*LINES, *INLINE]
        for call in re.findall(r"systemctl \S+ (.*)|journalctl ((?:-u \S+ ?)+)", text)
        for word in " ".join(call).replace("-u", "").split()
        if not word.startswith("--")
    }
    units = {path.name for path in HOSTING.glob("fishplate-*.*")}
    ours = {name if "." in name else f"{name}.service" for name in named - OF_DEBIAN}
    assert ours - {"fishplate.service"} <= units
    assert ours >= {"fishplate-api.service", "fishplate-workers.service", "fishplate-backup.timer"}


def test_settings_exist() -> None:
    known = {name for name, _, _ in rows()} | {"FISHPLATE_TOKEN"}
    assert set(re.findall(r"FISHPLATE_[A-Z_]+", PAGE)) <= known


def test_measures_exist() -> None:
    source = (ROOT / "api" / "metrics.py").read_text()
    named = set(re.findall(r"\bfishplate_[a-z_]+[a-z]\b(?!\.\.\.)", PAGE))
    assert len(named) >= 6
    for name in named:
        assert f'"{name.removesuffix("_total")}"' in source, name


def test_routes_exist(tmp_path: Path) -> None:
    app = create_app(Settings(store=tmp_path, redis_url="unix:///x"))
    routes = {re.sub(r"<(?:\w+:)?\w+>", "{}", rule.rule) for rule in app.url_map.iter_rules()}
    named = {
        re.sub(r"\{\w+\}", "{}", path)
        for path in re.findall(r"(?<![\w.])(/(?:v1|health|metrics)[a-z/{}]*)", PAGE)
    }
    assert {"/health/ready", "/metrics", "/v1/jobs", "/v1/jobs/{}"} <= named
    assert named <= routes
