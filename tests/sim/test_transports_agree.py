"""The same messages give the same virtual times and readings in-process, over HiSLIP and over raw sockets."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

import benchrun_sim
import pytest
import pyvisa
from benchrun_sim.servers import ServedBench

from tests.sim.simulated_bench import balloon_wiring

SEED = 7

#: Instrument and message, or an action of the runner.
SCRIPT: list[tuple[str, Any]] = [
    ("connect", ("output", "open")),
    (
        "analyser",
        "*CLS;:INIT:CONT OFF;:FORM REAL,64;:REC:LIST R3,R4;OFFS 0;:FREQ:MODE SWE;STAR 2.2GHZ;STOP 2.4GHZ;*OPC?",
    ),
    ("analyser", "SWE:POIN 11;:BAND 1KHZ;:AVER:COUN 2;:SOUR:POW 8;:OUTP ON;*OPC?"),
    ("sleep", 0.02),
    ("analyser", "INIT;*OPC?"),
    ("analyser", "REC:DATA?"),
    ("analyser", "REC:LIM?"),
    ("connect", ("output", "meter")),
    ("analyser", "FREQ:MODE CW;:SENS:FREQ:CW 2.3GHZ;*OPC?"),
    ("meter", "FREQ 2.3GHZ;:READ?"),
    ("ambient", "MEAS:TEMP?"),
    ("connect", ("output", "device")),
    ("supply", "SOUR1:VOLT -5;CURR 50 MA;:OUTP1 ON;:SOUR2:VOLT 28;CURR 3;VOLT:PROT 32;:OUTP2 ON;*OPC?"),
    ("supply", "SOUR1:VOLT -2.8;:MEAS2:CURR?;:MEAS1:VOLT?"),
    ("pump", "FREQ 2.293GHZ;POW -10;:OUTP ON;*OPC?"),
    ("align", 3_000_000_000),
    ("analyser", "REC:OFFS 0,-7E6,-14E6;:INIT;*WAI;:REC:DATA?"),
    ("supply", "MEAS2:CURR?;:MEAS2:VOLT?"),
    ("pump", "FREQ 99E9;*OPC?"),
    ("pump", "SYST:ERR?;*ESR?"),
    ("pump", "OUTP OFF;*OPC?"),
    ("supply", "OUTP2 OFF;:MEAS2:VOLT?"),
    ("supply", "OUTP1 OFF;*OPC?"),
]


def play(rehearsal: Any, links: Mapping[str, Any]) -> list[tuple[Any, int]]:
    """Run the script and return every answer with the virtual time after it."""
    actions: dict[str, Callable[[Any], None]] = {
        "connect": lambda where: rehearsal.connect(*where),
        "sleep": rehearsal.clock.sleep,
        "align": rehearsal.clock.align,
    }
    record: list[tuple[Any, int]] = []
    for who, what in SCRIPT:
        if who in actions:
            actions[who](what)
            record.append((None, rehearsal.clock.now_ns()))
            continue
        record.append((exchange(links[who], what), rehearsal.clock.now_ns()))
    return record


def exchange(link: Any, message: str) -> Any:
    """One message; an answer where it has a query. Blocks are read by count."""
    if "REC:DATA?" not in message:
        return link.query(message) if "?" in message else link.write(message)
    link.write(message)
    link.read_termination = None
    head = link.read_bytes(2)
    digits = link.read_bytes(int(head[1:2]))
    data = link.read_bytes(int(digits) + 1)
    link.read_termination = "\n"
    return bytes(data)


def played_in_process(seed: int) -> list[tuple[Any, int]]:
    rehearsal = benchrun_sim.open_in_process(balloon_wiring(), seed=seed)
    links = opened(pyvisa.ResourceManager(rehearsal.visa_library), rehearsal.addresses)
    record = play(rehearsal, links)
    rehearsal.close()
    return record


def opened(manager: pyvisa.ResourceManager, addresses: Mapping[str, str]) -> dict[str, Any]:
    return {
        name: manager.open_resource(address, read_termination="\n", write_termination="\n")
        for name, address in addresses.items()
    }


@pytest.fixture(scope="module")
def server() -> Any:
    made = benchrun_sim.serve(balloon_wiring(), seed=SEED)
    yield made
    made.close()


@pytest.fixture(scope="module")
def expected() -> list[tuple[Any, int]]:
    return played_in_process(SEED)


@pytest.mark.parametrize("transport", ["hislip", "sockets", "mixed"])
def test_transports(
    server: ServedBench, network: pyvisa.ResourceManager, expected: list[tuple[Any, int]], transport: str
) -> None:
    channel = benchrun_sim.open_channel(server.channel)
    addresses = {
        "hislip": server.hislip,
        "sockets": server.sockets,
        "mixed": {**server.hislip, "analyser": server.sockets["analyser"], "pump": server.sockets["pump"]},
    }[transport]
    record = play(channel, opened(network, addresses))
    channel.close()
    assert record == expected


def test_the_script_says_something(expected: list[tuple[Any, int]]) -> None:
    """Otherwise equality would mean little: readings are there, time moves, another seed reads otherwise."""
    answers = [answer for answer, _ in expected]
    times = [now for _, now in expected]
    assert times == sorted(times)
    assert len(set(times)) > len(SCRIPT) // 2
    assert len(answers[5]) == 11 * 2 * 16 + 1
    assert answers[-5] is not None
    assert played_in_process(SEED) == expected
    assert played_in_process(SEED + 1) != expected


def test_the_channel_starts_the_world_anew(server: ServedBench, network: pyvisa.ResourceManager) -> None:
    """The second run is the first again, even over links that stayed open."""
    links = opened(network, server.hislip)
    records = []
    for _ in range(2):
        channel = benchrun_sim.open_channel(server.channel)
        assert channel.clock.now_ns() == 0
        records.append(play(channel, links))
        channel.close()
    assert records[0] == records[1]
