"""Settings for every test: the same random networks on every run and every machine, and no clock."""

from __future__ import annotations

from hypothesis import HealthCheck, settings

settings.register_profile(
    "repeatable",
    derandomize=True,
    database=None,
    deadline=None,
    max_examples=40,
    print_blob=True,
    suppress_health_check=[HealthCheck.too_slow, HealthCheck.data_too_large, HealthCheck.filter_too_much],
)
settings.register_profile("search", settings.get_profile("repeatable"), derandomize=False, max_examples=2000)
settings.load_profile("repeatable")
