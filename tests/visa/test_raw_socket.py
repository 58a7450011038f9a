"""The session over pyvisa-py's raw sockets: what is known to go wrong there."""

from __future__ import annotations

import gc
import logging
import socket
import time
import warnings
from collections.abc import Iterator

import numpy as np
import pytest

from benchrun.errors import LinkError, NoAnswerError, ReplyError
from benchrun.visa import scpi
from benchrun.visa.session import Bus
from tests.visa.scripted import ScriptedInstrument, StepClock
from tests.visa.socket_server import SocketServer
from tests.visa.test_session import dialect, instrument


@pytest.fixture
def device() -> ScriptedInstrument:
    return instrument()


@pytest.fixture
def server(device: ScriptedInstrument) -> Iterator[SocketServer]:
    one = SocketServer(device)
    yield one
    one.close()


@pytest.fixture
def bus() -> Iterator[Bus]:
    with Bus("py") as one:
        yield one


def test_small_writes_go_at_once(server: SocketServer, bus: Bus) -> None:
    """Without TCP_NODELAY two writes and a query take 40 ms (Nagle against delayed acknowledgements; measured)."""
    session = bus.open("pump", server.address, dialect(), clock=StepClock())
    assert session.confirm("frequency", frequency=2e9) == 2e9
    wire = session._wire
    line = wire._library.sessions[wire._handle].interface  # type: ignore[attr-defined]
    assert line.getsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY)


def test_a_large_block(server: SocketServer, device: ScriptedInstrument, bus: Bus) -> None:
    numbers = np.random.default_rng(1).normal(size=4 * 1601 * 2)
    device.answers["SENS:DATA?"] = scpi.make_floats(numbers)
    session = bus.open("pump", server.address, dialect(), clock=StepClock())
    for _ in range(3):
        assert np.array_equal(session.block("data", numbers.size), numbers)
        assert session.ask("output") is False


def test_a_short_block_ends_at_the_deadline(server: SocketServer, device: ScriptedInstrument, bus: Bus) -> None:
    device.answers["SENS:DATA?"] = b"#3800" + bytes(96)
    session = bus.open("pump", server.address, dialect(), clock=StepClock())
    with pytest.raises(ReplyError, match=r"says 800 bytes, and fewer arrived before the deadline"):
        session.block("data", 100, deadline_s=0.2)
    assert session.suspect
    assert session.ask("output") is False
    assert server.connections == 2


def test_nothing_listens(bus: Bus, caplog: pytest.LogCaptureFixture) -> None:
    with socket.create_server(("127.0.0.1", 0)) as once:
        port = once.getsockname()[1]
    with pytest.raises(LinkError, match=r"cannot be opened, nothing answers there.*refused"):
        bus.open("pump", f"TCPIP0::127.0.0.1::{port}::SOCKET", dialect(), clock=StepClock())
    caplog.set_level(logging.CRITICAL, logger="pyvisa")  # its log would keep that socket
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", ResourceWarning)  # pyvisa-py leaves the refused socket to the garbage collector
        with pytest.raises(LinkError, match=r"cannot be opened"):
            bus.open("pump", f"TCPIP0::127.0.0.1::hislip0,{port}::INSTR", dialect(), clock=StepClock())
        gc.collect()


def test_the_other_end_hangs_up(server: SocketServer, bus: Bus) -> None:
    session = bus.open("pump", server.address, dialect(), clock=StepClock())
    server.hang_up_after = 0
    with pytest.raises(LinkError, match=r"the link broke") as caught:
        session.ask("output", deadline_s=0.2)
    assert not isinstance(caught.value, NoAnswerError)
    assert session.ask("output") is False


def test_the_deadline_holds(server: SocketServer, device: ScriptedInstrument, bus: Bus) -> None:
    """Both the exchange's deadline and the look into the error queue are bounded."""
    session = bus.open("pump", server.address, dialect(), clock=StepClock())
    device.receive = lambda message: b""  # type: ignore[method-assign]
    begin = time.monotonic()
    with pytest.raises(NoAnswerError, match=r"within 0\.2 s"):
        session.ask("output", deadline_s=0.2)
    assert time.monotonic() - begin < 5.0


def test_a_server_that_is_gone(server: SocketServer, bus: Bus) -> None:
    session = bus.open("pump", server.address, dialect(), clock=StepClock())
    assert session.ask("output") is False
    server.close()
    for _ in range(2):
        with pytest.raises(LinkError):
            session.ask("output", deadline_s=0.2)
