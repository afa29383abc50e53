"""One Hypothesis profile for the whole suite: no test is judged by time, the machine may be loaded."""

from hypothesis import HealthCheck, settings

settings.register_profile("untimed", deadline=None, suppress_health_check=[HealthCheck.too_slow])
settings.load_profile("untimed")
