"""What all tests share: property tests judge values, never time, and repeat themselves in CI.

And one browser for all tests that look at pages.
"""

import os
from collections.abc import Iterator

import pytest
from hypothesis import HealthCheck, settings

from tests.browser import Browser, browser, why_not

settings.register_profile(
    "fishplate",
    deadline=None,
    # A build must not fail for an example that the change under test did not bring.
    derandomize="CI" in os.environ,
    suppress_health_check=[HealthCheck.too_slow],
)
settings.load_profile("fishplate")


@pytest.fixture(scope="session")
def chromium(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Browser]:
    if reason := why_not():
        pytest.skip(reason)
    with browser(tmp_path_factory.mktemp("profile")) as found:
        yield found
