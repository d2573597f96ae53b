"""Property tests here know no time limits: the machine may be busy."""

from hypothesis import HealthCheck, settings

settings.register_profile("document", deadline=None, suppress_health_check=[HealthCheck.too_slow])
settings.load_profile("document")
