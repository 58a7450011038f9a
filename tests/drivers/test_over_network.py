"""The same drivers over HiSLIP and raw sockets, against the served bench on loopback."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any

import benchrun_sim
import numpy as np
import pytest

from benchrun.bench.model import Bench
from benchrun.contract.capture import Capture
from benchrun.drivers.identify import identify
from benchrun.drivers.open_bench import OpenBench, open_bench
from benchrun.drivers.registry import Registry
from benchrun.errors import IdentityError, LinkError
from benchrun.visa.session import Bus

HOT = Capture(("incident", "reflected"), ("probe", "pump", "image"), (0.0, -7e6, -14e6), (2.3e9,), 1000.0)
SWEEP = Capture(("incident", "reflected"), ("probe",), (0.0,), tuple(np.linspace(2.2e9, 2.4e9, 401)), 1e5)


@pytest.fixture
def served(bench: Bench) -> Iterator[Any]:
    one = benchrun_sim.serve(bench.wiring(), seed=1)
    yield one
    one.close()


def _addresses(served: Any, how: str) -> Mapping[str, str]:
    return dict(served.hislip if how == "hislip" else served.sockets)


def _use(opened: OpenBench) -> np.ndarray:
    """Prepare, take a hot reading and a sweep, and switch off."""
    opened.prepare()
    opened.set("probe.level", -10.0)
    opened.set("probe.frequency", 2.3e9)
    opened.signal("probe").output(True)
    opened.receiver.configure(HOT)
    hot = opened.receiver.acquire().data
    opened.receiver.configure(SWEEP)
    swept = opened.receiver.acquire().data
    opened.read("ambient.temperature")
    opened.read("drain.voltage")
    opened.read("meter.power")
    for instrument in opened.instruments.values():
        instrument.make_safe()
    return np.concatenate([hot.ravel(), swept.ravel()])


@pytest.mark.parametrize("how", ["hislip", "socket"])
def test_as_in_this_process(bench: Bench, registry: Registry, served: Any, how: str) -> None:
    """The same messages give the same readings, whatever carries them."""
    rehearsal = benchrun_sim.open_in_process(bench.wiring(), seed=1)
    with Bus(rehearsal.visa_library) as bus:
        here = _use(open_bench(bench, registry, bus, rehearsal.clock, rehearsal.addresses))
    channel = benchrun_sim.open_channel(served.channel)
    try:
        with Bus("py") as bus:
            there = _use(open_bench(bench, registry, bus, channel.clock, _addresses(served, how)))
    finally:
        channel.close()
    assert np.array_equal(here, there)


@pytest.mark.parametrize("how", ["hislip", "socket"])
def test_another_instrument(bench: Bench, registry: Registry, served: Any, how: str) -> None:
    addresses = _addresses(served, how)
    channel = benchrun_sim.open_channel(served.channel)
    try:
        with Bus("py") as bus:
            with pytest.raises(IdentityError, match=r"meter \(TCPIP0::127.0.0.1::.+\): Merrowby Mere-1 answers"):
                open_bench(bench, registry, bus, channel.clock, {**addresses, "meter": addresses["ambient"]})
            finding = identify(addresses["supply"], registry, bus, channel.clock)
            assert finding.best is not None
            assert finding.best.driver == "dc-supply"
    finally:
        channel.close()


def test_the_bench_goes_away(bench: Bench, registry: Registry) -> None:
    served = benchrun_sim.serve(bench.wiring(), seed=1)
    channel = benchrun_sim.open_channel(served.channel)
    with Bus("py") as bus:
        opened = open_bench(bench, registry, bus, channel.clock, _addresses(served, "socket"))
        opened.prepare()
        channel.close()
        served.close()
        for _ in range(2):
            with pytest.raises(LinkError, match="pump"):
                opened.set("pump.frequency", 2.3e9)
        opened.close()
