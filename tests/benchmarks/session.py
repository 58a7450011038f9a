"""What the session costs beside the plain thing: blocks of waves and single queries, over a socket and in this process.

Ours and the floor are measured turn by turn in one run, compared by medians; pyvisa's default by itself, because
the burst of work that it is disturbs whatever comes after it. The socket's other end is a process of its own with
canned replies; in this process the simulated instruments answer.
"""

from __future__ import annotations

import socket
import statistics
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from typing import Any, TypedDict

import benchrun_sim
import numpy as np
import pyvisa

from benchrun.contract.capture import FloatArray
from benchrun.visa.dialect import Dialect, DialectText, compile_dialect
from benchrun.visa.session import Bus, Session
from tests.sim.simulated_bench import balloon_wiring
from tests.visa.scripted import StepClock

WAVES, POINTS = 4, 1601
COUNT = 2 * WAVES * POINTS
BLOCK_BYTES = 8 * COUNT
HEAD_BYTES = 8
ERROR = b';0,"No error"\n'
MOST_TIMES_FLOOR, MOST_OVER_SOCKET, MOST_IN_PROCESS = 2.5, 1.15, 1.30
#: The other end: replies by the line that came.
SERVER = f"""
import socket
import numpy as np
payload = np.random.default_rng(1).normal(size={COUNT}).astype(">f8").tobytes()
block = b"#6%06d" % len(payload) + payload
number = b"2200000000"
replies = {{b"D?": block + b"\\n", b"F?": number + b"\\n"}}
replies |= {{b"D?;:SYST:ERR?": block + {ERROR!r}, b"F?;:SYST:ERR?": number + {ERROR!r}}}
with socket.create_server(("127.0.0.1", 0)) as listener:
    print(listener.getsockname()[1], flush=True)
    import threading
    def talk(line):
        line.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
        with line, line.makefile("rb") as messages:
            for message in messages:
                line.sendall(replies[message.strip()])
    while True:
        threading.Thread(target=talk, args=(listener.accept()[0],), daemon=True).start()
"""


class Figure(TypedDict):
    """One figure, its bound (at most; None where it is there for comparison), and whether it holds."""

    name: str
    figure: float
    bound: float | None
    holds: bool


def figures(rounds: int = 150) -> list[Figure]:
    """Return the figures of this topic."""
    with _server() as port:
        over_socket = _over_socket(port, rounds)
    return [*over_socket, *_in_process(rounds)]


def _figure(name: str, figure: float, bound: float | None) -> Figure:
    return {"name": name, "figure": round(figure, 3), "bound": bound, "holds": bound is None or figure <= bound}


def _medians_s(rounds: int, calls: int, **ways: Callable[[], object]) -> dict[str, float]:
    """Return the median time of one call of each way, taken turn by turn."""
    times: dict[str, list[float]] = {name: [] for name in ways}
    for _ in range(rounds):
        for name, way in ways.items():
            begin = time.perf_counter()
            for _ in range(calls):
                way()
            times[name].append((time.perf_counter() - begin) / calls)
    return {name: statistics.median(several) for name, several in times.items()}


def _dialect(data: str, frequency: str) -> Dialect:
    dialect, wrong = compile_dialect(
        DialectText.model_validate(
            {
                "benchrun": 1,
                "entries": {
                    "data": {"ask": data, "reply": "block"},
                    "frequency": {"ask": frequency, "reply": "frequency"},
                },
            }
        )
    )
    assert not wrong
    return dialect


@contextmanager
def _server() -> Iterator[int]:
    with subprocess.Popen([sys.executable, "-c", SERVER], stdout=subprocess.PIPE) as other_end:
        assert other_end.stdout is not None
        try:
            yield int(other_end.stdout.readline())
        finally:
            other_end.kill()


def _over_socket(port: int, rounds: int) -> list[Figure]:
    """Measure ours and the floor over one connection: another one's other end may sit on another core."""
    with Bus("py") as bus:
        address = f"TCPIP0::127.0.0.1::{port}::SOCKET"
        session = bus.open("other-end", address, _dialect("D?", "F?"), clock=StepClock())
        bare = _resource(session)
        bare.read_termination = bare.write_termination = "\n"
        other = pyvisa.ResourceManager("@py").open_resource(address, read_termination="\n", write_termination="\n")
        plain = bare.visalib.sessions[bare.session].interface
        blocks = _medians_s(
            rounds,
            1,
            plain=lambda: _plain_block(plain),
            ours=lambda: session.block("data", COUNT),
        )
        blocks |= _medians_s(
            rounds,
            1,
            default=lambda: other.query_binary_values("D?", datatype="d", is_big_endian=True, container=np.array),
        )
        queries = _medians_s(
            rounds,
            10,
            bare=lambda: bare.query("F?"),
            ours=lambda: session.query("frequency"),
            drained=lambda: session.ask("frequency"),
        )
    return _block_figures("socket", "plain socket", blocks) + _query_figures("socket", MOST_OVER_SOCKET, queries)


def _resource(session: Session) -> Any:
    """Return pyvisa's own object under a session."""
    return session._wire._resource  # type: ignore[attr-defined]


def _plain_block(line: socket.socket) -> FloatArray:
    """Read the numbers of a block with nothing but a socket, by a length known beforehand."""
    line.sendall(b"D?;:SYST:ERR?\n")
    left = HEAD_BYTES + BLOCK_BYTES + len(ERROR)
    pieces = []
    while left:
        pieces.append(line.recv(left))
        left -= len(pieces[-1])
    return _numbers(b"".join(pieces))


def _numbers(answer: bytes) -> FloatArray:
    return np.frombuffer(answer, dtype=">f8", count=COUNT, offset=HEAD_BYTES).astype(np.float64)


def _in_process(rounds: int) -> list[Figure]:
    wiring = balloon_wiring()
    wiring["instruments"]["analyser"]["wired_receivers"] = ["R1", "R2", "R3", "R4"]
    rehearsal = benchrun_sim.open_in_process(wiring, seed=1)
    library = rehearsal.visa_library
    with Bus(library) as bus:
        address = rehearsal.addresses["analyser"]
        dialect = _dialect("SENSe:RECeiver:DATA?", "SENSe:FREQuency:CW?")
        session = bus.open("analyser", address, dialect, clock=StepClock())
        bare = pyvisa.ResourceManager(library).open_resource(address, write_termination="\n")
        _sweep(rehearsal.rack.instruments["analyser"])
        blocks = _medians_s(
            rounds,
            1,
            plain=lambda: _plain_read(library, bare.session),
            ours=lambda: session.block("data", COUNT),
        )
        blocks |= _medians_s(
            rounds,
            1,
            default=lambda: bare.query_binary_values(
                "SENS:REC:DATA?", datatype="d", is_big_endian=True, container=np.array
            ),
        )
        queries = _medians_s(
            rounds,
            10,
            bare=lambda: bare.query("SENS:FREQ:CW?"),
            ours=lambda: session.query("frequency"),
            drained=lambda: session.ask("frequency"),
        )
    return _block_figures("in-process", "library's write and read of the same message", blocks) + _query_figures(
        "in-process", MOST_IN_PROCESS, queries
    )


def _sweep(analyser: Any) -> None:
    """Let the simulated analyser hold 4 waves at 1601 points."""
    for message in (
        "INIT:CONT OFF;:OUTP OFF;:FORM:DATA REAL,64;:SENS:FREQ:MODE SWE;:SENS:SWE:POIN 1601",
        "SENS:FREQ:STAR 2.2E9;STOP 2.4E9;:SENS:REC:LIST R1,R2,R3,R4;:INIT;*OPC?",
    ):
        analyser.execute(message)


def _plain_read(library: Any, handle: Any) -> FloatArray:
    """Exchange the same message with nothing but the library: the simulated instrument's own work is in both."""
    library.write(handle, b"SENS:REC:DATA?;:SYST:ERR?\n")
    return _numbers(library.read(handle, BLOCK_BYTES + 100)[0])


def _block_figures(where: str, floor: str, medians_s: dict[str, float]) -> list[Figure]:
    """Return a block's figures. Nothing beats its floor: below 1 the floor was disturbed, and nothing holds."""
    plain_s = medians_s["plain"]
    figures = [
        _figure(
            f"block of 4 x 1601 complex waves, {where}, times the {floor}",
            medians_s["ours"] / plain_s,
            MOST_TIMES_FLOOR,
        ),
        _figure(f"  the same by pyvisa's default, {where} (for comparison)", medians_s["default"] / plain_s, None),
    ]
    figures[0]["holds"] = 1.0 <= figures[0]["figure"] <= MOST_TIMES_FLOOR
    return figures


def _query_figures(where: str, bound: float, medians_s: dict[str, float]) -> list[Figure]:
    bare_s = medians_s["bare"]
    return [
        _figure(f"query without error drain, {where}, times a bare pyvisa query", medians_s["ours"] / bare_s, bound),
        _figure(f"  the same with error drain, {where} (for comparison)", medians_s["drained"] / bare_s, None),
    ]
