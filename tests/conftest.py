"""Settings for every test: the same random networks on every run and every machine, and no clock."""

from __future__ import annotations

import os

from hypothesis import HealthCheck, Phase, settings

os.environ["COLUMNS"] = "100"  # tables are as wide here as on any terminal

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
# For trying out whether a law notices a fault put in on purpose: the first failure, not the smallest.
settings.register_profile("first", settings.get_profile("repeatable"), phases=[Phase.generate])
settings.load_profile("repeatable")
