"""The fault injector, in-process: each kind shows the client what its name says, at the exchange it was planned for."""

from __future__ import annotations

import math
import struct
from typing import Any, get_args

import pytest
import pyvisa
from benchrun_sim.faults import GARBAGE, FaultInjector, Kind
from benchrun_sim.in_process import InProcessRehearsal
from hypothesis import given
from hypothesis import strategies as st
from pyvisa.constants import StatusCode

from tests.sim.test_in_process_visa import MS, Links, status_of


@pytest.fixture
def pump(links: Links) -> Any:
    links["pump"].write("*CLS")
    return links["pump"]


@pytest.fixture
def analyser(links: Links) -> Any:
    links["analyser"].write("*CLS;:INIT:CONT OFF;:SWE:POIN 3;:FORM REAL,64;:INIT;*WAI")
    links["analyser"].read_termination = None
    return links["analyser"]


def next_one(rehearsal: InProcessRehearsal) -> int:
    return rehearsal.faults.exchanges + 1


def test_no_answer(rehearsal: InProcessRehearsal, pump: Any) -> None:
    rehearsal.faults.add("no-answer", at=next_one(rehearsal))
    pump.write("POW -20;POW?")
    start = rehearsal.clock.now_ns()
    assert status_of(pump.read) == StatusCode.error_timeout
    assert rehearsal.clock.now_ns() - start == 2000 * MS
    assert pump.query("POW?") == "0.0"  # it was not executed
    assert pump.query("SYST:ERR?").startswith("0,")


def test_no_answer_for_ever_of_one_instrument(rehearsal: InProcessRehearsal, links: Links) -> None:
    rehearsal.faults.add("no-answer", at=2, instrument="pump", times=None)
    assert links["pump"].query("*OPC?") == "1"
    for _ in range(3):
        assert status_of(links["pump"].query, "*OPC?") == StatusCode.error_timeout
        assert links["meter"].query("*OPC?") == "1"
    rehearsal.faults.clear()
    assert links["pump"].query("*OPC?") == "1"


def test_lost_answer(rehearsal: InProcessRehearsal, pump: Any) -> None:
    rehearsal.faults.add("lost-answer", at=next_one(rehearsal))
    assert status_of(pump.query, "POW -20;POW?") == StatusCode.error_timeout
    assert pump.query("POW?") == "-20.0"


def test_late_answer(rehearsal: InProcessRehearsal, links: Links, pump: Any) -> None:
    rehearsal.faults.add("late-answer", at=next_one(rehearsal), delay_s=1.0)
    pump.write("POW?")
    start = rehearsal.clock.now_ns()
    assert pump.read() == "0.0"
    assert rehearsal.clock.now_ns() - start == 1000 * MS
    rehearsal.faults.add("late-answer", at=next_one(rehearsal), delay_s=3.0)
    assert status_of(pump.query, "POW?") == StatusCode.error_timeout
    assert pump.query("FREQ?") == "1000000000.0"  # message based: the late answer is thrown away,
    assert pump.query("SYST:ERR?").startswith("-410")  # and the instrument says so
    supply = links["supply"]
    rehearsal.faults.add("late-answer", at=next_one(rehearsal), delay_s=3.0)
    assert status_of(supply.query, "SYST:VERS?") == StatusCode.error_timeout
    assert supply.query("*OPC?") == "1999.0"  # a stream: the answer to the question before


def test_garbage(rehearsal: InProcessRehearsal, pump: Any) -> None:
    rehearsal.faults.add("garbage", at=next_one(rehearsal))
    pump.write("POW?")
    assert pump.read_raw() == GARBAGE


@pytest.mark.parametrize(
    ("kind", "end"), [("half-block", StatusCode.error_timeout), ("short-block", StatusCode.success)]
)
def test_parts_of_a_block(rehearsal: InProcessRehearsal, analyser: Any, kind: Kind, end: StatusCode) -> None:
    rehearsal.faults.add(kind, at=next_one(rehearsal))
    analyser.write("REC:DATA?")
    first, _ = analyser.visalib.read(analyser.session, 5)
    assert first == b"#248" + struct.pack(">d", analyser_value(rehearsal))[:1]
    if end == StatusCode.success:
        rest, status = analyser.visalib.read(analyser.session, 1000)
        assert status == end
        assert len(first + rest) < 4 + 48
    else:
        assert status_of(analyser.visalib.read, analyser.session, 1000) == end
    analyser.clear()
    assert analyser.query("SYST:ERR?").startswith("0,")


def analyser_value(rehearsal: InProcessRehearsal) -> float:
    receiver: Any = rehearsal.rack.instruments["analyser"]
    return float(receiver._data[0].ravel()[0].real)


def test_a_block_of_the_wrong_length(rehearsal: InProcessRehearsal, analyser: Any) -> None:
    rehearsal.faults.add("wrong-length", at=next_one(rehearsal))
    assert len(analyser.query_binary_values("REC:DATA?", "d", True)) == 5
    assert len(analyser.query_binary_values("REC:DATA?", "d", True)) == 6


def test_not_a_number(rehearsal: InProcessRehearsal, analyser: Any, pump: Any) -> None:
    rehearsal.faults.add("nan", at=next_one(rehearsal), times=2)
    assert sum(map(math.isnan, analyser.query_binary_values("REC:DATA?", "d", True))) == 1
    assert float(pump.query("POW?")) == 9.91e37


def test_error_entry(rehearsal: InProcessRehearsal, pump: Any) -> None:
    rehearsal.faults.add("error-entry", at=next_one(rehearsal), number=-310, detail="rehearsed")
    assert pump.query("POW -3;POW?") == "-3.0"
    assert pump.query("SYST:ERR?") == '-310,"System error;rehearsed"'
    rehearsal.faults.add("error-entry", at=next_one(rehearsal))
    assert pump.query("POW -4;*OPC?;:SYST:ERR?").startswith("1;-240")


@pytest.mark.parametrize(("kind", "executed"), [("connection-reset", False), ("reset-after", True)])
def test_connection_reset(
    rehearsal: InProcessRehearsal, manager: pyvisa.ResourceManager, pump: Any, kind: Kind, executed: bool
) -> None:
    rehearsal.faults.add(kind, at=next_one(rehearsal), refuse=2)
    assert status_of(pump.query, "POW -20;POW?") == StatusCode.error_connection_lost
    for call in (pump.read, pump.read_stb, pump.clear):
        assert status_of(call) == StatusCode.error_connection_lost
    address = rehearsal.addresses["pump"]
    for _ in range(2):
        assert status_of(manager.open_resource, address) == StatusCode.error_resource_not_found
    again: Any = manager.open_resource(address, read_termination="\n")
    assert again.query("POW?") == ("-20.0" if executed else "0.0")


def test_power_cycle(rehearsal: InProcessRehearsal, manager: pyvisa.ResourceManager, links: Links) -> None:
    address = rehearsal.addresses["analyser"]
    other: Any = manager.open_resource(address, read_termination="\n")
    other.write("OUTP OFF")
    rehearsal.faults.add("power-cycle", at=next_one(rehearsal))
    assert status_of(links["analyser"].query, "OUTP?") == StatusCode.error_connection_lost
    assert status_of(other.query, "OUTP?") == StatusCode.error_connection_lost
    again: Any = manager.open_resource(address, read_termination="\n")
    assert again.query("OUTP?;*ESR?") == "1;128"  # the preset's port power, and the power-on bit
    assert links["pump"].query("*OPC?") == "1"


def test_wrong_plans_are_refused() -> None:
    faults = FaultInjector()
    with pytest.raises(ValueError, match="not a fault"):
        faults.add("earthquake", at=1)  # type: ignore[arg-type]
    with pytest.raises(ValueError, match="counted from 1"):
        faults.add("nan", at=0)


@given(
    st.lists(st.sampled_from(["pump", "meter"]), max_size=30),
    st.integers(1, 12),
    st.sampled_from([None, "pump", "meter"]),
    st.one_of(st.none(), st.integers(1, 4)),
)
def test_which_exchanges_are_hit(order: list[str], at: int, instrument: str | None, times: int | None) -> None:
    faults = FaultInjector()
    faults.add(get_args(Kind)[0], at=at, instrument=instrument, times=times)
    counted = 0
    for name in order:
        counted += instrument in {None, name}
        last = math.inf if times is None else at + times - 1
        expected = instrument in {None, name} and at <= counted <= last
        assert (faults.draw(name) is not None) is expected
    assert faults.exchanges == len(order)
