"""Shell completion: what a shell is told when somebody presses the tab key."""

import os
import subprocess
import sys
from pathlib import Path

import pytest
from click.shell_completion import ShellComplete

from api.commands import COMMANDS, main

FISHPLATE = Path(sys.executable).with_name("fishplate")
HEAVY = ("scipy", "vtk", "vtkmodules", "pyvista", "netgen", "pymetis")


def complete(*words: str) -> list[tuple[str, str]]:
    """Kind and text of what may stand in place of the last word."""
    shell = ShellComplete(main, {}, "fishplate", "_FISHPLATE_COMPLETE")
    return [(item.type, item.value) for item in shell.get_completions([*words[:-1]], words[-1])]


def texts(*words: str) -> list[str]:
    return [text for _, text in complete(*words)]


@pytest.fixture
def here(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A folder with documents and other things, in which the person is."""
    for name in ("gusset.json", "gulls.txt", "lug.json", "yard/a.json", "yard/b c.json"):
        path = tmp_path / name
        path.parent.mkdir(exist_ok=True)
        path.touch()
    (tmp_path / "gully").mkdir()
    (tmp_path / "empty").mkdir()
    monkeypatch.chdir(tmp_path)
    return tmp_path


def test_commands_are_completed() -> None:
    assert texts("") == list(COMMANDS)
    assert texts("s") == ["serve", "solve", "submit"]
    assert texts("tokens", "re") == ["revoke"]


def test_options_are_completed() -> None:
    assert texts("--v") == ["--version"]
    assert {"--out", "--pictures"} <= set(texts("solve", "--"))
    assert texts("submit", "--an") == ["--anew"]
    assert texts("submit", "--priority", "") == ["interactive", "bulk"]


@pytest.mark.parametrize("command", ["solve", "submit", "check"])
@pytest.mark.usefixtures("here")
def test_job_documents_are_completed(command: str) -> None:
    """Not the text file; folders, because documents may be in them."""
    assert texts(command, "gu") == ["gully/", "gusset.json"]
    assert texts(command, "l") == ["lug.json"]


@pytest.mark.usefixtures("here")
def test_a_second_document_is_completed_too() -> None:
    assert texts("solve", "lug.json", "gus") == ["gusset.json"]


@pytest.mark.usefixtures("here")
@pytest.mark.parametrize(
    ("start", "kind"), [("gul", "dir"), ("empty/", "dir"), ("nowhere/x", "dir"), ("yard/", "file")]
)
def test_the_shell_completes_what_it_knows_better(start: str, kind: str) -> None:
    """Lone folders, to which it appends a slash, and names with blanks, which it quotes."""
    assert complete("solve", start) == [(kind, start)]


def test_bash_is_answered_without_loading_the_solver(here: Path) -> None:
    """As bash asks: by the installed command, through the environment."""
    asked = {
        "_FISHPLATE_COMPLETE": "bash_complete",
        "COMP_WORDS": "fishplate solve lu",
        "COMP_CWORD": "2",
    }
    done = subprocess.run(
        [sys.executable, "-X", "importtime", FISHPLATE], cwd=here, env={**os.environ, **asked},
        capture_output=True, text=True, check=True,
    )  # fmt: skip
    assert done.stdout.split() == ["plain,lug.json"]
    loaded = {line.rsplit("|", 1)[-1].strip().split(".")[0] for line in done.stderr.splitlines()}
    assert "api" in loaded
    assert loaded.isdisjoint(HEAVY)


@pytest.mark.parametrize("shell", ["bash", "zsh", "fish"])
def test_there_is_a_script_for_each_shell(shell: str) -> None:
    """What the README puts into the shell's start-up file."""
    done = subprocess.run(
        [FISHPLATE], env={**os.environ, "_FISHPLATE_COMPLETE": f"{shell}_source"},
        capture_output=True, text=True, check=True,
    )  # fmt: skip
    assert "fishplate" in done.stdout
    if shell == "bash":
        subprocess.run(["bash", "-n", "-c", done.stdout], check=True)


@pytest.mark.parametrize("command", ["solve", "submit", "check", "verify"])
def test_help_is_answered_without_loading_the_solver(command: str) -> None:
    program = (
        "import sys\nfrom api.commands import main\nmain([*sys.argv[1:], '--help'], "
        f"standalone_mode=False)\nprint([m for m in {HEAVY} if m in sys.modules])"
    )
    done = subprocess.run(
        [sys.executable, "-c", program, command], capture_output=True, text=True, check=True
    )
    assert done.stdout.splitlines()[-1] == "[]"
