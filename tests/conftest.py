"""What all tests share: property tests judge values, never time, and repeat themselves in CI."""

import os

from hypothesis import HealthCheck, settings

settings.register_profile(
    "fishplate",
    deadline=None,
    # A build must not fail for an example that the change under test did not bring.
    derandomize="CI" in os.environ,
    suppress_health_check=[HealthCheck.too_slow],
)
settings.load_profile("fishplate")
