"""The served bench through pyvisa-py: HiSLIP and raw sockets as a client meets them."""

from __future__ import annotations

import socket
import threading
import time
from typing import Any

import benchrun_sim
import numpy as np
import pytest
import pyvisa
from benchrun_sim.listener import MOST_CONNECTIONS
from benchrun_sim.servers import ServedBench

from tests.sim.simulated_bench import balloon_wiring

BOTH = pytest.mark.parametrize("transport", ["hislip", "sockets"])


@pytest.fixture
def bench() -> Any:
    made = benchrun_sim.serve(balloon_wiring(), seed=1)
    yield made
    made.close()


def opened(network: pyvisa.ResourceManager, bench: ServedBench, transport: str, name: str) -> Any:
    address = {"hislip": bench.hislip, "sockets": bench.sockets}[transport][name]
    return network.open_resource(address, read_termination="\n", write_termination="\n")


def plain(bench: ServedBench, name: str) -> socket.socket:
    return socket.create_connection(("127.0.0.1", int(bench.sockets[name].split("::")[2])), timeout=10)


@BOTH
def test_every_instrument_answers(served: ServedBench, network: pyvisa.ResourceManager, transport: str) -> None:
    makers = {opened(network, served, transport, name).query("*IDN?").split(",")[0] for name in served.hislip}
    assert len(makers) == 5


@BOTH
def test_blocks_of_four_waves_and_1601_points(
    served: ServedBench, network: pyvisa.ResourceManager, transport: str
) -> None:
    link = opened(network, served, transport, "analyser")
    link.write("*RST;*CLS;:SWE:POIN 1601;:REC:LIST R3,R4;OFFS 0,-7E6;:FORM REAL,64;:INIT")
    assert link.query("*OPC?") == "1"
    link.read_termination = None
    link.write("REC:DATA?")
    size = 4 * 1601 * 16
    raw = link.read_bytes(8 + size + 1, chunk_size=1 << 20)
    assert raw[:8] == b"#6102464"
    assert raw[-1:] == b"\n"
    data = np.frombuffer(raw[8:-1], ">f8")
    receiver: Any = served.rack.instruments["analyser"]
    assert np.array_equal(data.view(">c16").reshape(2, 2, 1601), receiver._data[0])
    link.read_termination = "\n"
    values = link.query_binary_values("REC:DATA?", "d", is_big_endian=True, container=np.array)
    assert np.array_equal(values, data)
    assert link.query("SYST:ERR?").startswith("0,")


@BOTH
def test_a_block_may_be_sent(served: ServedBench, network: pyvisa.ResourceManager, transport: str) -> None:
    link = opened(network, served, transport, "pump")
    frequencies = [2.2e9 + 1e6 * index for index in range(400)]
    link.write_binary_values("LIST:FREQ ", frequencies, "d", is_big_endian=True)
    assert [float(text) for text in link.query("LIST:FREQ?").split(",")] == frequencies


def test_status_byte_over_hislip(served: ServedBench, network: pyvisa.ResourceManager) -> None:
    link = opened(network, served, "hislip", "pump")
    link.write("*CLS;*ESE 32;POW?")
    assert settled(link, 0x10) == 0x10
    link.read()
    assert settled(link, 0) == 0
    link.write("FOO")
    assert settled(link, 0x24) == 0x24
    link.write("*CLS;*ESE 0")


def settled(link: Any, expected: int) -> int:
    """Poll: the two channels of HiSLIP keep no order between them."""
    deadline = time.monotonic() + 10
    while (byte := int(link.read_stb())) != expected and time.monotonic() < deadline:
        time.sleep(0.01)
    return byte


def test_device_clear_over_hislip(served: ServedBench, network: pyvisa.ResourceManager) -> None:
    link = opened(network, served, "hislip", "pump")
    link.clear()
    assert link.query("*CLS;:SYST:ERR?").startswith("0,")
    link.clear()
    assert link.query("*OPC?") == "1"


def test_hislip_message_size_is_agreed(served: ServedBench, network: pyvisa.ResourceManager) -> None:
    """A client that takes small messages gets its answer in several."""
    link = opened(network, served, "hislip", "pump")
    link.set_visa_attribute(pyvisa.constants.ResourceAttribute.tcpip_hislip_max_message_kb, 1)
    frequencies = ",".join(str(2.2e9 + index) for index in range(900))
    link.write(f"LIST:FREQ {frequencies}")
    assert link.query("LIST:FREQ?") == frequencies


def test_locks_over_hislip(served: ServedBench, network: pyvisa.ResourceManager) -> None:
    """Through pyvisa-py's protocol class, because its VISA level does not offer locks for HiSLIP."""
    one, two = (opened(network, served, "hislip", "pump") for _ in range(2))
    first, second = (link.visalib.sessions[link.session].interface for link in (one, two))
    assert first.async_lock_request(1.0) == "success"
    assert second.async_lock_info() == 1
    assert second.async_lock_request(0.0) == "failure"
    first.async_lock_release()
    assert second.async_lock_request(5.0, "shared") == "success shared"
    assert first.async_lock_request(5.0, "shared") == "success shared"
    assert one.query("*OPC?") == "1"
    one.close()
    two.close()
    third = opened(network, served, "hislip", "pump")
    assert wait_for(lambda: third.visalib.sessions[third.session].interface.async_lock_info() == 0)


def wait_for(condition: Any) -> bool:
    deadline = time.monotonic() + 10
    while not condition() and time.monotonic() < deadline:
        time.sleep(0.01)
    return bool(condition())


def test_local_lockout_over_hislip(served: ServedBench, network: pyvisa.ResourceManager) -> None:
    link = opened(network, served, "hislip", "pump")
    interface = link.visalib.sessions[link.session].interface
    assert link.query("SYST:KLOC?") == "0"
    interface.async_remote_local_control("enableAndGTRLLO")
    assert link.query("SYST:KLOC?") == "1"
    interface.async_remote_local_control("justGTL")
    assert link.query("SYST:KLOC?") == "0"


# ---- clients that misbehave -----------------------------------------------------------------------------------------


@BOTH
def test_a_client_that_vanishes_leaves_the_others_alone(
    served: ServedBench, network: pyvisa.ResourceManager, transport: str
) -> None:
    gone = opened(network, served, transport, "pump")
    gone.write("FREQ?")
    gone.close()
    assert opened(network, served, transport, "pump").query("*OPC?") == "1"


def test_a_client_that_never_reads_does_not_hold_the_bench_up(
    bench: ServedBench, network: pyvisa.ResourceManager
) -> None:
    stuck = plain(bench, "analyser")
    stuck.sendall(b"SWE:POIN 20001;:REC:LIST R3,R4;:FORM REAL,64;:INIT:CONT OFF;:INIT\n" + b"REC:DATA?\n" * 40)
    assert opened(network, bench, "sockets", "analyser").query("SWE:POIN?") in {"201", "20001"}
    assert opened(network, bench, "hislip", "pump").query("*OPC?") == "1"
    stuck.close()


def test_nonsense_on_a_socket(bench: ServedBench, network: pyvisa.ResourceManager) -> None:
    for nonsense in (b"\xff" * 1000 + b"\n", b"#9999999999", b"'\n\"\n#\n", b"\x00\n", b":;:;\n"):
        with plain(bench, "pump") as client:
            client.sendall(nonsense)
    link = opened(network, bench, "sockets", "pump")
    assert link.query("*OPC?") == "1"


def test_too_many_connections_are_turned_away(bench: ServedBench) -> None:
    clients = [plain(bench, "pump") for _ in range(MOST_CONNECTIONS)]
    clients[0].sendall(b"*OPC?\n")
    assert clients[0].recv(10) == b"1\n"
    with plain(bench, "pump") as one_more:
        assert one_more.recv(10) == b""
    for client in clients:
        client.close()
    assert wait_for(lambda: answers(bench))


def answers(bench: ServedBench) -> bool:
    with plain(bench, "pump") as client:
        try:
            client.sendall(b"*OPC?\n")
            return client.recv(10) == b"1\n"
        except OSError:
            return False


def test_exchanges_of_several_clients_are_serial(bench: ServedBench) -> None:
    """Each message costs 1 ms of virtual time, whoever sends it: none is lost, none is counted twice."""

    def work() -> None:
        with plain(bench, "pump") as client, client.makefile("rb") as lines:
            for _ in range(100):
                client.sendall(b"*OPC?\n")
                assert lines.readline() == b"1\n"

    start = bench.rack.world.now_ns
    threads = [threading.Thread(target=work) for _ in range(4)]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    assert bench.rack.world.now_ns - start == 400 * 1_000_000


@BOTH
def test_faults_over_the_network(bench: ServedBench, network: pyvisa.ResourceManager, transport: str) -> None:
    bench.faults.add("connection-reset", at=2, instrument="pump")
    link = opened(network, bench, transport, "pump")
    assert link.query("*OPC?") == "1"
    with pytest.raises((OSError, RuntimeError, pyvisa.errors.VisaIOError)):
        link.query("*OPC?")
    assert opened(network, bench, transport, "pump").query("*OPC?") == "1"
    bench.faults.add("no-answer", at=1, instrument="meter")
    meter = opened(network, bench, transport, "meter")
    meter.timeout = 100
    with pytest.raises(pyvisa.errors.VisaIOError):
        meter.query("*OPC?")


def test_close_ends_everything() -> None:
    before = set(threading.enumerate())
    made = benchrun_sim.serve(balloon_wiring(), seed=1)
    clients = [plain(made, name) for name in made.sockets]
    port = made.channel
    made.close()
    for client in clients:
        with client:
            assert client.recv(10) == b""
    with pytest.raises(OSError):
        benchrun_sim.open_channel(port)
    assert set(threading.enumerate()) <= before
    made.close()
