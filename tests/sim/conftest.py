from __future__ import annotations

from collections.abc import Iterator
from typing import Any

import benchrun_sim
import pytest
import pyvisa
from benchrun_sim.in_process import InProcessRehearsal
from benchrun_sim.rack import Rack
from benchrun_sim.servers import ServedBench

from tests.sim.simulated_bench import balloon_wiring


@pytest.fixture
def rack() -> Rack:
    return Rack(balloon_wiring(), seed=1)


@pytest.fixture
def rehearsal() -> Iterator[InProcessRehearsal]:
    made = benchrun_sim.open_in_process(balloon_wiring(), seed=1)
    yield made
    made.close()


@pytest.fixture
def manager(rehearsal: InProcessRehearsal) -> pyvisa.ResourceManager:
    return pyvisa.ResourceManager(rehearsal.visa_library)


@pytest.fixture
def links(rehearsal: InProcessRehearsal, manager: pyvisa.ResourceManager) -> dict[str, Any]:
    """An open resource for each instrument, by name."""
    return {
        name: manager.open_resource(address, read_termination="\n", write_termination="\n")
        for name, address in rehearsal.addresses.items()
    }


@pytest.fixture(scope="module")
def served() -> Iterator[ServedBench]:
    made = benchrun_sim.serve(balloon_wiring(), seed=1)
    yield made
    made.close()


@pytest.fixture
def network() -> Iterator[pyvisa.ResourceManager]:
    made = pyvisa.ResourceManager("@py")
    yield made
    made.close()
