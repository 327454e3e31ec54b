"""Shared by all tests: where the demo cases are, and a settled hypothesis profile."""

from __future__ import annotations

import os
import sys
from pathlib import Path

import pytest
from hypothesis import HealthCheck, settings

# So that test modules find the shared builders: from meshes import box.
sys.path.insert(0, str(Path(__file__).parent))

# The same examples on every run: a test that fails must fail again.
settings.register_profile(
    "seamfold",
    derandomize=True,
    deadline=None,
    suppress_health_check=[HealthCheck.too_slow, HealthCheck.function_scoped_fixture],
)
settings.load_profile("seamfold")


@pytest.fixture(scope="session")
def opengl() -> None:
    """For tests that draw: skipped where there is no OpenGL, failed if that is in CI."""
    from viewer.offscreen import NO_OPENGL, Trial

    with Trial() as trial:
        if not trial.succeeds():
            (pytest.fail if os.environ.get("CI") else pytest.skip)(NO_OPENGL)
