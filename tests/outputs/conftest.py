"""Pictures can only be tested where a picture can be rendered; the reason is shown otherwise."""

import pytest

from workers.outputs.drawing.offscreen import probe


@pytest.fixture(scope="session")
def rendering() -> None:
    """Skip, with the reason in plain words, on a machine without off-screen OpenGL."""
    reason = probe()
    if reason is not None:
        pytest.skip(reason)
