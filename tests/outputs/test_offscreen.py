"""A machine that cannot render says so in plain words, and nothing crashes but a child."""

import os
import sys

import pytest

from workers.errors import PicturesUnavailableError
from workers.outputs.drawing import offscreen


def program(text: str) -> tuple[str, ...]:
    return (sys.executable, "-c", text)


SEGFAULT = program("import os, signal; os.kill(os.getpid(), signal.SIGSEGV)")
WRONG = program("import sys; sys.exit('the test picture came out wrong: black')")
SLOW = program("import time; time.sleep(60)")
ONLY_SOFTWARE = program(
    "import os, sys; sys.exit(os.environ['VTK_DEFAULT_OPENGL_WINDOW'] != 'vtkOSOpenGLRenderWindow')"
)


@pytest.fixture(autouse=True)
def _asked_anew(monkeypatch):
    monkeypatch.delenv(offscreen.WINDOW, raising=False)
    offscreen.probe.cache_clear()
    yield
    offscreen.probe.cache_clear()


@pytest.mark.parametrize(
    ("trial", "words"), [(SEGFAULT, "SIGSEGV"), (WRONG, "came out wrong"), (SLOW, "not ready")]
)
def test_a_failed_trial_becomes_a_reason_and_an_error(monkeypatch, trial, words):
    monkeypatch.setattr(offscreen, "TRIAL", trial)
    monkeypatch.setattr(offscreen, "SECONDS", 0.5)
    reason = offscreen.probe()
    assert reason is not None
    assert words in reason
    assert "complete without pictures" in reason
    with pytest.raises(PicturesUnavailableError, match=words):
        offscreen.require()


def test_the_next_kind_of_window_is_tried_and_kept(monkeypatch):
    monkeypatch.setattr(offscreen, "TRIAL", ONLY_SOFTWARE)
    assert offscreen.probe() is None
    assert os.environ[offscreen.WINDOW] == "vtkOSOpenGLRenderWindow"


def test_a_window_that_the_machine_is_told_to_use_is_the_only_one_tried(monkeypatch):
    monkeypatch.setenv(offscreen.WINDOW, "vtkEGLRenderWindow")
    monkeypatch.setattr(offscreen, "TRIAL", ONLY_SOFTWARE)
    reason = offscreen.probe()
    assert reason is not None
    assert "vtkEGLRenderWindow" in reason
    assert "vtkOSOpenGLRenderWindow" not in reason


def test_missing_libraries_are_named_with_the_packages_that_have_them(monkeypatch):
    monkeypatch.setattr(offscreen, "TRIAL", SEGFAULT)
    monkeypatch.setattr("ctypes.util.find_library", lambda name: None)
    reason = offscreen.probe()
    assert reason is not None
    assert "libEGL" in reason
    assert "libegl1" in reason


def test_the_question_is_asked_once(monkeypatch):
    monkeypatch.setattr(offscreen, "TRIAL", program("pass"))
    assert offscreen.probe() is None
    monkeypatch.setattr(offscreen, "TRIAL", SEGFAULT)
    assert offscreen.probe() is None
