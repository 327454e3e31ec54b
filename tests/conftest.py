"""Shared by all tests: where the demo cases are, and a settled hypothesis profile."""

from __future__ import annotations

from hypothesis import HealthCheck, settings

# The same examples on every run: a test that fails must fail again.
settings.register_profile(
    "seamfold",
    derandomize=True,
    deadline=None,
    suppress_health_check=[HealthCheck.too_slow, HealthCheck.function_scoped_fixture],
)
settings.load_profile("seamfold")
