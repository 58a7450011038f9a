"""Worlds for the tests of the world."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import pytest
from benchrun_sim.world import World

from .demo_bench import PERFECT, demo_wiring


@pytest.fixture
def make_world() -> Callable[..., World]:
    """Build a demo bench; keywords go to the wiring's rehearsal part."""

    def build(seed: int = 1, **rehearsal: Any) -> World:
        return World(demo_wiring(**rehearsal), seed)

    return build


@pytest.fixture
def perfect(make_world: Callable[..., World]) -> World:
    """The demo bench with every imperfection off."""
    return make_world(**PERFECT)
