"""Makes the questions and shapes of tests/external importable, and hypothesis repeat itself exactly."""

import sys
from pathlib import Path

from hypothesis import HealthCheck, settings

sys.path.insert(0, str(Path(__file__).parents[1] / "external"))

settings.register_profile(
    "enclosures",
    derandomize=True,
    deadline=None,
    database=None,
    suppress_health_check=[HealthCheck.too_slow],
)
settings.load_profile("enclosures")
