"""The rehearsal channel: time and connections of a served bench."""

from __future__ import annotations

import json
import socket
import time
from collections.abc import Iterator
from typing import Any

import benchrun_sim
import pytest
from benchrun_sim.channel import ChannelRehearsal
from benchrun_sim.servers import ServedBench
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from tests.sim.simulated_bench import balloon_wiring

MS = 1_000_000


@pytest.fixture
def channel(served: ServedBench) -> Iterator[ChannelRehearsal]:
    made = benchrun_sim.open_channel(served.channel)
    yield made
    made.close()


def test_time(channel: ChannelRehearsal) -> None:
    clock = channel.clock
    assert clock.virtual
    assert clock.now_ns() == 0
    clock.sleep(0.25)
    assert clock.now_ns() == 250 * MS
    clock.align(100 * MS)
    assert clock.now_ns() == 250 * MS
    clock.align(300 * MS)
    assert clock.now_ns() == 300 * MS
    with pytest.raises(ValueError, match="nanoseconds"):
        clock.sleep(-1.0)
    assert clock.now_ns() == 300 * MS


def test_it_offers_no_library_and_no_addresses(channel: ChannelRehearsal) -> None:
    assert channel.visa_library is None
    assert channel.addresses == {}


def test_it_says_its_seed(channel: ChannelRehearsal) -> None:
    assert channel.seed == 1
    served = benchrun_sim.serve(balloon_wiring(), seed=4)
    other = benchrun_sim.open_channel(served.channel)
    assert other.seed == benchrun_sim.open_in_process(balloon_wiring(), seed=4).seed == 4
    other.close()
    served.close()


def test_joining_starts_anew(served: ServedBench, channel: ChannelRehearsal) -> None:
    channel.clock.sleep(5.0)
    served.rack.instruments["pump"].execute("POW -33")
    other = benchrun_sim.open_channel(served.channel)
    assert other.clock.now_ns() == channel.clock.now_ns() == 0
    assert served.rack.instruments["pump"].execute("POW?") == b"0.0\n"
    other.close()


def test_connections_of_the_operator(
    served: ServedBench, channel: ChannelRehearsal, monkeypatch: pytest.MonkeyPatch
) -> None:
    seen: list[Any] = []
    monkeypatch.setattr(served.rack.world, "connect", lambda *what: seen.append(what))
    channel.connect("output", "short")
    assert seen == [("output", "short")]


def test_a_connection_that_cannot_be_made(channel: ChannelRehearsal) -> None:
    with pytest.raises(ValueError, match="nowhere"):
        channel.connect("nowhere", "open")
    assert channel.clock.now_ns() == 0


def test_real_time(served: ServedBench) -> None:
    channel = benchrun_sim.open_channel(served.channel, real_time=True)
    started = time.monotonic()
    channel.clock.sleep(0.1)
    assert time.monotonic() - started >= 0.1
    channel.close()
    virtual = benchrun_sim.open_channel(served.channel)
    virtual.clock.sleep(1000.0)
    assert time.monotonic() - started < 100.0
    virtual.close()


@pytest.mark.parametrize("address", ["", "127.0.0.1", "127.0.0.1:", ":80", "127.0.0.1:abc"])
def test_addresses_that_are_none(address: str) -> None:
    with pytest.raises(ValueError, match="host:port"):
        benchrun_sim.open_channel(address)


def test_nobody_there() -> None:
    with socket.create_server(("127.0.0.1", 0)) as server:
        port = server.getsockname()[1]
    with pytest.raises(OSError):
        benchrun_sim.open_channel(f"127.0.0.1:{port}")


def test_a_bench_that_goes_away() -> None:
    served = benchrun_sim.serve(balloon_wiring(), seed=1)
    channel = benchrun_sim.open_channel(served.channel)
    served.close()
    with pytest.raises(OSError):
        channel.clock.now_ns()
    channel.close()


def ask(served: ServedBench, line: bytes) -> Any:
    host, port = served.channel.split(":")
    with socket.create_connection((host, int(port)), timeout=10) as client, client.makefile("rb") as lines:
        client.sendall(line + b"\n")
        return json.loads(lines.readline())


@pytest.mark.parametrize(
    "line",
    [b"", b"{", b"[1]", b"7", b"null", b'{"do": "truth"}', b'{"do": 3}', b'{"do": "sleep"}', b'{"do": "connect"}',
     b'{"do": "sleep", "duration_ns": -1}', b'{"do": "sleep", "duration_ns": 1e9}',
     b'{"do": "sleep", "duration_ns": true}',
     b'{"do": "align", "start_ns": 10000000000000000000000}', b"\xff\xfe", b"[" * 30000],
)  # fmt: skip
def test_wrong_requests_are_refused(served: ServedBench, channel: ChannelRehearsal, line: bytes) -> None:
    assert set(ask(served, line)) == {"error"}
    assert channel.clock.now_ns() == 0


def test_a_line_without_end_is_cut_off(served: ServedBench, channel: ChannelRehearsal) -> None:
    assert set(ask(served, b"x" * (1 << 17))) == {"error"}
    assert channel.clock.now_ns() == 0


@given(
    st.dictionaries(st.sampled_from(["do", "plane", "what", "duration_ns", "start_ns", "truth"]), st.text(max_size=8))
)
@settings(max_examples=50, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
def test_no_request_tells_more_than_time_and_seed(served: ServedBench, request_: dict[str, str]) -> None:
    assert set(ask(served, json.dumps(request_).encode())) <= {"now_ns", "error", "seed"}
