"""Hypothesis repeats itself exactly in these tests too."""

from hypothesis import HealthCheck, settings

settings.register_profile(
    "bounds", derandomize=True, deadline=None, database=None, suppress_health_check=[HealthCheck.too_slow]
)
settings.load_profile("bounds")
