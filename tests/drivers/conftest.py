"""The example bench, opened in this process against the simulated instruments."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import benchrun_sim
import pytest

from benchrun.bench.load import load_bench
from benchrun.bench.model import Bench
from benchrun.drivers.open_bench import OpenBench, open_bench
from benchrun.drivers.registry import Registry, load_registry
from benchrun.visa.session import Bus

RECIPES = Path(__file__).parents[2] / "recipes"


@dataclass
class Rehearsed:
    """A bench file, what reaches its simulated instruments, and the drivers."""

    bench: Bench
    registry: Registry
    rehearsal: Any
    bus: Bus

    def open(self, **addresses: str) -> OpenBench:
        """Open the bench; some addresses may be others than the rehearsal's."""
        given = {**self.rehearsal.addresses, **addresses}
        return open_bench(self.bench, self.registry, self.bus, self.rehearsal.clock, given)


@pytest.fixture(scope="session")
def registry() -> Registry:
    return load_registry()


@pytest.fixture(scope="session")
def bench() -> Bench:
    loaded, problems = load_bench(RECIPES / "balloon-driver.bench.yaml")
    assert problems == []
    assert loaded is not None
    return loaded


@pytest.fixture
def rehearsed(bench: Bench, registry: Registry) -> Iterator[Rehearsed]:
    rehearsal = benchrun_sim.open_in_process(bench.wiring(), seed=1)
    with Bus(rehearsal.visa_library) as bus:
        yield Rehearsed(bench, registry, rehearsal, bus)
