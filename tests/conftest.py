"""What all tests share: where the examples are, and hypothesis without deadlines (machines differ and are shared).

Where CI is set the examples are the same each time, so that what lands is judged by the change alone; elsewhere they
are new each time, and find what the fixed ones do not.
"""

from __future__ import annotations

import os
from pathlib import Path

import pytest
from hypothesis import HealthCheck, settings

settings.register_profile(
    "benchrun", deadline=None, suppress_health_check=[HealthCheck.too_slow], derandomize=bool(os.environ.get("CI"))
)
settings.load_profile("benchrun")


@pytest.fixture(scope="session")
def recipes() -> Path:
    """The folder of example files."""
    return Path(__file__).parent.parent / "recipes"
