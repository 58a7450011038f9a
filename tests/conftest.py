"""What all tests share: where the examples are, and hypothesis without deadlines (machines differ and are shared)."""

from __future__ import annotations

from pathlib import Path

import pytest
from hypothesis import HealthCheck, settings

settings.register_profile("benchrun", deadline=None, suppress_health_check=[HealthCheck.too_slow])
settings.load_profile("benchrun")


@pytest.fixture(scope="session")
def recipes() -> Path:
    """The folder of example files."""
    return Path(__file__).parent.parent / "recipes"
