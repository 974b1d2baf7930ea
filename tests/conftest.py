"""Settings shared by all tests."""

from __future__ import annotations

import os

from hypothesis import HealthCheck, settings

# Wall-clock limits would fail on a busy machine and say nothing about the code; the seed is fixed so
# that a run is repeatable. With GASPHYS_LONG set more is drawn, from new seeds.
settings.register_profile("quick", max_examples=60, deadline=None, derandomize=True, database=None)
settings.register_profile(
    "long",
    max_examples=2000,
    deadline=None,
    database=None,
    suppress_health_check=[HealthCheck.too_slow],
)
settings.load_profile("long" if os.environ.get("GASPHYS_LONG") else "quick")
