"""pyvisa over the in-process library: messages, termination, time-outs, status byte, events, attributes."""

from __future__ import annotations

import time
from typing import Any

import benchrun_sim
import numpy as np
import pytest
import pyvisa
from benchrun_sim.in_process import InProcessRehearsal
from benchrun_sim.visa import library
from pyvisa.constants import EventMechanism, EventType, ResourceAttribute, StatusCode

from tests.sim.simulated_bench import balloon_wiring

MS = 1_000_000
Links = dict[str, Any]


def status_of(call: Any, *arguments: Any, **named: Any) -> StatusCode:
    with pytest.raises(pyvisa.errors.VisaIOError) as caught:
        call(*arguments, **named)
    return StatusCode(caught.value.error_code)


def test_every_kind_of_resource_opens_and_answers(links: Links) -> None:
    """TCPIP INSTR, TCPIP SOCKET, USB and GPIB: all that the wiring names."""
    for link in links.values():
        assert len(link.query("*IDN?").split(",")) == 4


@pytest.mark.parametrize("address", ["ASRL3::INSTR", "ASRL/dev/ttyUSB0::INSTR"])
def test_serial_resources(address: str) -> None:
    wiring = balloon_wiring()
    wiring["instruments"]["ambient"]["address"] = address
    rehearsal = benchrun_sim.open_in_process(wiring, seed=1)
    link: Any = pyvisa.ResourceManager(rehearsal.visa_library).open_resource(
        address, read_termination="\n", write_termination="\n", baud_rate=115200
    )
    assert link.baud_rate == 115200
    assert link.query("*IDN?").startswith("Merrowby,")
    rehearsal.close()


@pytest.mark.parametrize("name", ["TCPIP::192.0.2.21::hislip0", "tcpip0::192.0.2.21::hislip0::INSTR"])
def test_the_name_of_a_resource_may_be_written_short(manager: pyvisa.ResourceManager, name: str) -> None:
    link: Any = manager.open_resource(name)
    assert link.query("*IDN?").startswith("Quillfen Works,")


def test_resources_that_are_not_there(manager: pyvisa.ResourceManager) -> None:
    assert status_of(manager.open_resource, "TCPIP0::192.0.2.99::hislip0::INSTR") == StatusCode.error_resource_not_found
    assert status_of(manager.open_bare_resource, "nonsense") == StatusCode.error_invalid_resource_name


def test_list_of_resources(manager: pyvisa.ResourceManager) -> None:
    assert len(manager.list_resources("?*")) == 5
    assert manager.list_resources("GPIB?*INSTR") == ("GPIB0::7::INSTR",)


def test_two_instruments_with_one_address_are_refused() -> None:
    wiring = balloon_wiring()
    wiring["instruments"]["meter"]["address"] = "tcpip::192.0.2.21::hislip0"
    with pytest.raises(ValueError, match="one address"):
        benchrun_sim.open_in_process(wiring, seed=1)


def test_each_world_has_a_library_of_its_own(links: Links) -> None:
    other = benchrun_sim.open_in_process(balloon_wiring(), seed=2)
    link: Any = pyvisa.ResourceManager(other.visa_library).open_resource(other.addresses["pump"])
    link.write("POW -20")
    other.close()
    assert links["pump"].query("POW?") == "0.0"  # another world, and still open


def test_a_closed_link_is_closed(links: Links, rehearsal: InProcessRehearsal) -> None:
    session = links["pump"].session
    links["pump"].close()
    assert status_of(rehearsal.visa_library.write, session, b"*IDN?") == StatusCode.error_invalid_object
    assert links["analyser"].query("*OPC?") == "1"


# ---- reading --------------------------------------------------------------------------------------------------------


def test_reading_in_pieces_ends_with_the_message(links: Links) -> None:
    link = links["pump"]
    link.read_termination = None
    link.chunk_size = 3
    assert link.query("*IDN?;") == link.query("*IDN?")
    link.write("SYST:VERS?")
    visa, session = link.visalib, link.session
    assert visa.read(session, 4) == (b"1999", StatusCode.success_max_count_read)
    assert visa.read(session, 100) == (b".0\n", StatusCode.success)


def test_the_termination_character_ends_a_read(links: Links) -> None:
    link = links["analyser"]
    link.read_termination = ","
    link.write("*IDN?")
    assert link.visalib.read(link.session, 100) == (
        b"Larkmoor Instruments,",
        StatusCode.success_termination_character_read,
    )
    assert link.read() == "Tarn-4"


def test_suppressed_end_reads_on_until_the_time_out(links: Links, rehearsal: InProcessRehearsal) -> None:
    link = links["pump"]
    link.read_termination = None
    link.set_visa_attribute(ResourceAttribute.suppress_end_enabled, True)
    link.write("POW?")
    start = rehearsal.clock.now_ns()
    assert status_of(link.read_raw) == StatusCode.error_timeout
    assert rehearsal.clock.now_ns() - start == 2000 * MS


def test_without_send_end_a_message_waits_for_its_line_feed(links: Links) -> None:
    link = links["pump"]
    link.send_end = False
    link.write_raw(b"PO")
    link.write_raw(b"W?;")
    assert status_of(link.read) == StatusCode.error_timeout
    link.write_raw(b"FREQ?\n")
    assert link.read() == "0.0;1000000000.0"


def test_a_socket_is_a_stream(links: Links) -> None:
    """No END: a message ends at its line feed, and answers wait one behind the other."""
    link = links["supply"]
    link.write_raw(b"SYST:VERS?")
    assert status_of(link.read) == StatusCode.error_timeout
    link.write_raw(b"\n*OPC?\n")
    assert (link.read(), link.read()) == ("1999.0", "1")
    assert link.query("SYST:ERR?").startswith("0,")
    assert status_of(link.read_stb) == StatusCode.error_nonsupported_operation


def test_large_blocks(links: Links) -> None:
    link = links["analyser"]
    link.write("INIT:CONT OFF;:FREQ:MODE SWE;:SWE:POIN 1601;:REC:LIST R3,R4;OFFS 0,-7E6;:FORM REAL,64;:INIT")
    assert link.query("*OPC?") == "1"
    values = link.query_binary_values("REC:DATA?", "d", is_big_endian=True, container=np.array)
    assert values.shape == (2 * 2 * 1601 * 2,)
    link.read_termination = None
    link.write("REC:DATA?")
    raw = link.read_bytes(8 + values.nbytes + 1, chunk_size=1 << 20)
    assert raw[:8] == b"#6102464"
    assert raw[-1:] == b"\n"
    assert np.array_equal(np.frombuffer(raw[8:-1], ">f8"), values)
    assert link.query("SYST:ERR?").strip() == '0,"No error"'


# ---- time -----------------------------------------------------------------------------------------------------------


def test_time_outs_cost_virtual_time_only(links: Links, rehearsal: InProcessRehearsal) -> None:
    link = links["pump"]
    link.timeout = 3_600_000
    start, started = rehearsal.clock.now_ns(), time.monotonic()
    assert status_of(link.read) == StatusCode.error_timeout
    assert rehearsal.clock.now_ns() - start == 3_600_000 * MS
    assert time.monotonic() - started < 60.0
    link.timeout = None
    assert status_of(link.read) == StatusCode.error_timeout
    assert [link.query("SYST:ERR?")[:4] for _ in range(3)] == ["-420", "-420", '0,"N']


def test_a_message_before_the_answer_is_read_interrupts(links: Links) -> None:
    link = links["pump"]
    link.write("FREQ?")
    assert link.query("POW?") == "0.0"
    assert link.query("SYST:ERR?").startswith("-410")


def test_the_clock(rehearsal: InProcessRehearsal) -> None:
    clock = rehearsal.clock
    assert clock.virtual
    assert clock.now_ns() == 0
    clock.sleep(0.25)
    assert clock.now_ns() == 250 * MS
    clock.align(100 * MS)
    assert clock.now_ns() == 250 * MS
    clock.align(300 * MS)
    assert clock.now_ns() == 300 * MS
    with pytest.raises(ValueError, match="sleep"):
        clock.sleep(-1.0)


def test_real_time_lets_the_clock_run() -> None:
    rehearsal = benchrun_sim.open_in_process(balloon_wiring(), seed=1, real_time=True)
    started = time.monotonic()
    rehearsal.clock.sleep(0.05)
    assert time.monotonic() - started >= 0.05
    link: Any = pyvisa.ResourceManager(rehearsal.visa_library).open_resource(rehearsal.addresses["meter"])
    link.query("READ?")
    assert time.monotonic() - started >= 0.07
    rehearsal.close()


# ---- status byte and events -----------------------------------------------------------------------------------------


def test_serial_poll(links: Links) -> None:
    link = links["pump"]
    link.write("*CLS;*ESE 32;*SRE 32;POW?")
    assert link.read_stb() == 0x10  # an answer waits
    link.read()
    link.write("FOO")
    assert link.read_stb() == 0x64  # error available, event summary, service requested
    assert link.read_stb() == 0x24  # asked for once (IEEE 488.2 section 11.2.2.1)
    link.write("*CLS;FOO")
    assert link.read_stb() == 0x64


def test_service_request_at_the_end_of_a_sweep(links: Links, rehearsal: InProcessRehearsal) -> None:
    link = links["analyser"]
    link.write("INIT:CONT OFF;:SWE:POIN 201;:BAND 10;*CLS;*ESE 1;*SRE 32")
    link.enable_event(EventType.service_request, EventMechanism.queue)
    start = rehearsal.clock.now_ns()
    link.write("INIT;*OPC")
    assert status_of(link.wait_on_event, EventType.service_request, 1000) == StatusCode.error_timeout
    response = link.wait_on_event(EventType.service_request, 60_000)
    assert not response.timed_out
    assert rehearsal.clock.now_ns() == start + MS + 201 * (120_000_000 + 200_000)
    assert link.read_stb() & 0x60 == 0x60
    link.disable_event(EventType.service_request, EventMechanism.queue)
    assert status_of(link.wait_on_event, EventType.service_request, 1) == StatusCode.error_not_enabled


def test_device_clear_empties_both_queues(links: Links) -> None:
    link = links["pump"]
    link.send_end = False
    link.write_raw(b"POW?\nFREQ")
    link.clear()
    link.send_end = True
    assert link.query("FREQ?") == "1000000000.0"
    assert link.query("SYST:ERR?").startswith("0,")


# ---- attributes -----------------------------------------------------------------------------------------------------


def test_attributes(links: Links) -> None:
    link = links["pump"]
    assert link.timeout == 2000
    link.timeout = 1234
    assert link.timeout == 1234
    assert link.resource_name == "TCPIP0::192.0.2.21::hislip0::INSTR"
    assert link.interface_type == pyvisa.constants.InterfaceType.tcpip
    read_only = ResourceAttribute.resource_name
    assert status_of(link.set_visa_attribute, read_only, "x") == StatusCode.error_attribute_read_only
    foreign = ResourceAttribute.asrl_data_bits
    assert status_of(link.get_visa_attribute, foreign) == StatusCode.error_nonsupported_attribute
    assert status_of(link.set_visa_attribute, foreign, 9600) == StatusCode.error_nonsupported_attribute
    links["supply"].set_visa_attribute(ResourceAttribute.tcpip_nodelay, True)


def test_closing_the_manager_closes_everything(rehearsal: InProcessRehearsal) -> None:
    manager = pyvisa.ResourceManager(rehearsal.visa_library)
    link: Any = manager.open_resource(rehearsal.addresses["pump"])
    manager.close()
    with pytest.raises(pyvisa.errors.InvalidSession):
        link.query("*IDN?")
    again: Any = pyvisa.ResourceManager(rehearsal.visa_library).open_resource(rehearsal.addresses["pump"])
    assert again.query("*OPC?") == "1\n"


def test_a_library_of_no_wiring_reaches_nothing(rehearsal: InProcessRehearsal) -> None:
    rehearsal.rack.wiring["instruments"]["pump"].pop("address")
    assert "TCPIP0::192.0.2.21::hislip0::INSTR" not in library(rehearsal.rack)._resources
