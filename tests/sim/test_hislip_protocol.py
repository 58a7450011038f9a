"""The HiSLIP server by single messages (IVI-6.1, from memory): what pyvisa-py's client never sends, and what harms."""

from __future__ import annotations

import contextlib
import socket
import struct
import threading
from collections.abc import Iterator
from typing import NamedTuple

import benchrun_sim
import pytest
from benchrun_sim.hislip_wire import Type
from benchrun_sim.servers import ServedBench
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from tests.sim.simulated_bench import balloon_wiring


class Got(NamedTuple):
    kind: int
    control: int
    parameter: int
    payload: bytes


class Client:
    """A HiSLIP client without any courtesy."""

    def __init__(self, bench: ServedBench, name: str = "pump") -> None:
        self.port = int(bench.hislip[name].split(",")[1].split(":")[0])
        self.sync = self.connect()
        self.asynchronous: socket.socket | None = None

    def connect(self) -> socket.socket:
        return socket.create_connection(("127.0.0.1", self.port), timeout=10)

    def begin(self) -> Client:
        put(self.sync, Type.INITIALIZE, 0, 0x0100_7878, b"hislip0")
        response = get(self.sync)
        assert (response.kind, response.control, response.parameter >> 16) == (Type.INITIALIZE_RESPONSE, 0, 0x0100)
        self.asynchronous = self.connect()
        put(self.asynchronous, Type.ASYNC_INITIALIZE, 0, response.parameter & 0xFFFF)
        assert get(self.asynchronous).kind == Type.ASYNC_INITIALIZE_RESPONSE
        return self

    @property
    def second(self) -> socket.socket:
        assert self.asynchronous is not None
        return self.asynchronous

    def say(self, text: bytes, message_id: int, *, delivered: bool = True) -> None:
        put(self.sync, Type.DATA_END, int(delivered), message_id, text)

    def close(self) -> None:
        self.sync.close()
        if self.asynchronous is not None:
            self.asynchronous.close()


def put(connection: socket.socket, kind: int, control: int = 0, parameter: int = 0, payload: bytes = b"") -> None:
    connection.sendall(struct.pack("!2sBBIQ", b"HS", kind, control, parameter, len(payload)) + payload)


def get(connection: socket.socket) -> Got:
    head = exactly(connection, 16)
    prologue, kind, control, parameter, length = struct.unpack("!2sBBIQ", head)
    assert prologue == b"HS"
    return Got(kind, control, parameter, exactly(connection, length))


def exactly(connection: socket.socket, count: int) -> bytes:
    data = b""
    while len(data) < count:
        piece = connection.recv(count - len(data))
        if not piece:
            raise EOFError
        data += piece
    return data


@pytest.fixture
def client(served: ServedBench) -> Iterator[Client]:
    made = Client(served).begin()
    yield made
    made.close()


def test_a_response_carries_the_number_of_its_message(client: Client) -> None:
    client.say(b"SYST:VERS?", 0xFFFF_FF00)
    assert get(client.sync) == (Type.DATA_END, 0, 0xFFFF_FF00, b"1999.0\n")
    client.say(b"*CLS", 0xFFFF_FF02)
    put(client.sync, Type.DATA, 1, 0xFFFF_FF04, b"*O")
    put(client.sync, Type.DATA_END, 1, 0xFFFF_FF06, b"PC?\n")
    assert get(client.sync) == (Type.DATA_END, 0, 0xFFFF_FF06, b"1\n")


def test_long_responses_come_in_pieces(client: Client) -> None:
    put(client.second, Type.ASYNC_MAXIMUM_MESSAGE_SIZE, 0, 0, struct.pack("!Q", 100))
    assert get(client.second) == (Type.ASYNC_MAXIMUM_MESSAGE_SIZE_RESPONSE, 0, 0, struct.pack("!Q", 1 << 20))
    client.say(b"LIST:FREQ " + b",".join([b"2E9"] * 30) + b";FREQ?", 2)
    pieces = [get(client.sync)]
    while pieces[-1].kind == Type.DATA:
        pieces.append(get(client.sync))
    assert pieces[-1].kind == Type.DATA_END
    assert all(len(piece.payload) <= 84 for piece in pieces)
    assert b"".join(piece.payload for piece in pieces) == b",".join([b"2000000000.0"] * 30) + b"\n"


def test_a_message_before_the_response_was_read_interrupts(client: Client) -> None:
    client.say(b"*CLS;:FREQ?", 0)
    get(client.sync)
    client.say(b"SYST:ERR?", 2, delivered=False)
    assert get(client.sync)[:3] == (Type.INTERRUPTED, 0, 2)
    assert get(client.second)[:3] == (Type.ASYNC_INTERRUPTED, 0, 2)
    answer = get(client.sync)
    assert answer.parameter == 2
    assert answer.payload.startswith(b"-410")
    put(client.second, Type.ASYNC_STATUS_QUERY, 1, 4)
    get(client.second)
    client.say(b"SYST:ERR?", 4, delivered=False)  # the status query has said that it was read
    assert get(client.sync).payload.startswith(b"0,")


def test_device_clear_throws_away_what_is_under_way(client: Client) -> None:
    client.say(b"FREQ?", 0)
    put(client.sync, Type.DATA, 1, 2, b"POW -33;")
    put(client.second, Type.ASYNC_DEVICE_CLEAR)
    assert get(client.second).kind == Type.ASYNC_DEVICE_CLEAR_ACKNOWLEDGE
    client.say(b"POW -44;POW?", 4)  # between the two: thrown away
    put(client.sync, Type.DEVICE_CLEAR_COMPLETE)
    while (answer := get(client.sync)).kind != Type.DEVICE_CLEAR_ACKNOWLEDGE:
        assert answer.parameter == 0
    client.say(b"POW?;:SYST:ERR?", 0xFFFF_FF00, delivered=False)
    assert get(client.sync).payload == b'0.0;0,"No error"\n'


def test_service_request_arrives_on_the_asynchronous_channel(client: Client) -> None:
    client.say(b"*CLS;*ESE 32;*SRE 32;*OPC?", 0)
    get(client.sync)
    client.say(b"FOO", 2)
    request = get(client.second)
    assert (request.kind, request.control) == (Type.ASYNC_SERVICE_REQUEST, 0x64)
    put(client.second, Type.ASYNC_STATUS_QUERY, 1, 4)
    assert get(client.second).control == 0x64
    client.say(b"*CLS;*SRE 0;*ESE 0;*OPC?", 4)
    assert get(client.sync).payload == b"1\n"


def test_unknown_messages_are_answered_with_an_error(client: Client) -> None:
    put(client.sync, 200, 0, 0, b"abc")
    assert get(client.sync)[:2] == (Type.ERROR, 1)
    put(client.second, 201)
    assert get(client.second)[:2] == (Type.ERROR, 1)
    client.say(b"*OPC?", 0)
    assert get(client.sync).payload == b"1\n"


@pytest.mark.parametrize(
    ("first", "code"),
    [
        (b"GET / HTTP/1.1\r\nHost: bench\r\n\r\n", 1),
        (struct.pack("!2sBBIQ", b"HS", Type.INITIALIZE, 0, 0, 1 << 60), 1),
        (struct.pack("!2sBBIQ", b"HS", Type.INITIALIZE, 0, 0, 7) + b"hislip9", 3),
        (struct.pack("!2sBBIQ", b"HS", Type.ASYNC_INITIALIZE, 0, 60000, 0), 3),
        (struct.pack("!2sBBIQ", b"HS", Type.DATA_END, 0, 0, 0), 3),
    ],
)
def test_a_wrong_beginning_is_a_fatal_error(served: ServedBench, first: bytes, code: int) -> None:
    client = Client(served)
    client.sync.sendall(first)
    assert get(client.sync)[:2] == (Type.FATAL_ERROR, code)
    with pytest.raises((EOFError, ConnectionError)):
        get(client.sync)
    client.close()


def test_messages_before_the_second_channel_are_a_fatal_error(served: ServedBench) -> None:
    client = Client(served)
    put(client.sync, Type.INITIALIZE, 0, 0x0100_7878, b"hislip0")
    get(client.sync)
    client.say(b"*OPC?", 0)
    assert get(client.sync)[:2] == (Type.FATAL_ERROR, 2)
    client.close()


def test_a_second_asynchronous_channel_is_refused(served: ServedBench) -> None:
    client = Client(served)
    put(client.sync, Type.INITIALIZE, 0, 0x0100_7878, b"hislip0")
    session = get(client.sync).parameter & 0xFFFF
    client.asynchronous = client.connect()
    for connection, expected in ((client.second, Type.ASYNC_INITIALIZE_RESPONSE), (client.connect(), Type.FATAL_ERROR)):
        put(connection, Type.ASYNC_INITIALIZE, 0, session)
        assert get(connection).kind == expected
        if connection is not client.second:
            connection.close()
    client.say(b"*OPC?", 0)
    assert get(client.sync).payload == b"1\n"
    client.close()


def test_an_exclusive_lock_keeps_others_waiting(served: ServedBench, client: Client) -> None:
    other = Client(served).begin()
    put(client.second, Type.ASYNC_LOCK, 1, 1000)
    assert get(client.second)[:2] == (Type.ASYNC_LOCK_RESPONSE, 1)
    put(client.second, Type.ASYNC_LOCK, 1, 1000)
    assert get(client.second)[:2] == (Type.ASYNC_LOCK_RESPONSE, 3)
    other.say(b"*OPC?", 0)
    other.sync.settimeout(0.2)
    with pytest.raises(TimeoutError):
        other.sync.recv(1)
    other.sync.settimeout(10)
    client.say(b"SYST:VERS?", 0)
    assert get(client.sync).payload == b"1999.0\n"
    client.close()  # a client that goes away takes its lock along
    assert get(other.sync).payload == b"1\n"
    other.close()


@given(
    st.lists(
        st.one_of(
            st.binary(max_size=60), st.integers(0, 40).map(lambda kind: struct.pack("!2sBBIQ", b"HS", kind, 0, 1, 0))
        )
    )
)
@settings(max_examples=40, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
def test_no_bytes_whatever_harm_the_server(served: ServedBench, pieces: list[bytes]) -> None:
    client = Client(served)
    with contextlib.suppress(OSError, EOFError):
        for piece in pieces:
            client.sync.sendall(piece)
    client.close()
    good = Client(served).begin()
    good.say(b"*OPC?", 0)
    assert get(good.sync).payload == b"1\n"
    good.close()


def test_closing_wakes_those_who_wait() -> None:
    before = set(threading.enumerate())
    made = benchrun_sim.serve(balloon_wiring(), seed=1)
    one, two = Client(made).begin(), Client(made).begin()
    put(one.second, Type.ASYNC_LOCK, 1, 0)
    get(one.second)
    two.say(b"*OPC?", 0)  # kept waiting by the lock
    made.close()
    assert set(threading.enumerate()) <= before
    one.close()
    two.close()
