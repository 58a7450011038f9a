"""The rehearsal channel: owns a served bench's virtual time and carries the operator's connections.

It never tells the truth about the world. One JSON object on each line, over TCP on loopback. Requests:
{"do": "hello", "real_time": false} starts the world anew at time 0 and says its seed; "now"; "sleep" with duration_ns;
"align" with start_ns; "connect" with plane and what. Each is answered by {"now_ns": ...} or {"error": "..."}.
"""

from __future__ import annotations

import json
import socket
import threading
from collections.abc import Mapping
from typing import Any, BinaryIO

from .listener import HOST, Listener
from .rack import Rack, VirtualClock

LONGEST_LINE = 1 << 16
LONGEST_SLEEP_NS = 10**18
_OPEN_S = 5.0
_ANSWER_S = 60.0


class ChannelServer:
    """Serves one bench's time."""

    def __init__(self, rack: Rack) -> None:
        self._rack = rack
        self._clock = VirtualClock(rack)
        self._listener = Listener("rehearsal channel", self._serve)
        self.address = f"{HOST}:{self._listener.port}"

    def close(self) -> None:
        """Stop serving."""
        self._listener.close()

    def _serve(self, connection: socket.socket) -> None:
        with connection.makefile("rb") as lines:
            while line := lines.readline(LONGEST_LINE):
                answer = self._answer(line)
                connection.sendall(json.dumps(answer).encode() + b"\n")
                if not line.endswith(b"\n"):
                    return  # too long: where the next request begins is unknown

    def _answer(self, line: bytes) -> dict[str, Any]:
        try:
            said = self._do(json.loads(line))
        except (ValueError, KeyError, TypeError, AttributeError, RecursionError) as error:
            return {"error": f"{type(error).__name__}: {error}"[:500]}
        return {"now_ns": self._clock.now_ns(), **said}

    def _do(self, request: Mapping[str, Any]) -> Mapping[str, int]:
        match request.get("do"):
            case "hello":
                self._restart(real_time=bool(request.get("real_time", False)))
                return {"seed": self._rack.seed}
            case "now":
                pass
            case "sleep":
                self._clock.sleep_ns(_whole(request, "duration_ns"))
            case "align":
                self._clock.align(_whole(request, "start_ns"))
            case "connect":
                self._rack.connect(str(request["plane"]), str(request["what"]))
            case other:
                raise ValueError(f"there is no request {other!r:.40}")
        return {}

    def _restart(self, *, real_time: bool) -> None:
        with self._rack.lock:
            self._rack.real_time = real_time
            self._rack.restart()


def _whole(request: Mapping[str, Any], name: str) -> int:
    value = request[name]
    if type(value) is not int or not 0 <= value <= LONGEST_SLEEP_NS:
        raise ValueError(f"{name} is a whole number of nanoseconds, not {value!r:.40}")
    return value


class ChannelRehearsal:
    """The product's end of the channel: clock and connections of a bench that is served elsewhere."""

    visa_library = None

    def __init__(self, address: str, *, real_time: bool = False) -> None:
        host, colon, port = address.rpartition(":")
        if not (colon and host and port.isdecimal()):
            raise ValueError(f"{address} is not the address of a rehearsal channel: host:port")
        self._lock = threading.Lock()
        self._connection = socket.create_connection((host, int(port)), timeout=_OPEN_S)
        self._connection.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
        self._lines: BinaryIO = self._connection.makefile("rb")
        self._real_time = real_time
        self.clock = ChannelClock(self)
        self.seed = int(self._said({"do": "hello", "real_time": real_time})["seed"])

    @property
    def addresses(self) -> Mapping[str, str]:
        """Nothing: the bench file that belongs to a served bench has the addresses."""
        return {}

    def connect(self, plane: str, what: str) -> None:
        """Do what the operator is asked to do."""
        self.request({"do": "connect", "plane": plane, "what": what})

    def close(self) -> None:
        """Leave the channel."""
        self._lines.close()
        self._connection.close()

    def request(self, request: Mapping[str, Any], *, waits_s: float = 0.0) -> int:
        """Return the virtual time after a request. Raises ValueError if it is refused, OSError if the channel broke."""
        return int(self._said(request, waits_s)["now_ns"])

    def _said(self, request: Mapping[str, Any], waits_s: float = 0.0) -> Mapping[str, Any]:
        with self._lock:
            self._connection.settimeout(_ANSWER_S + (waits_s if self._real_time else 0.0))
            self._connection.sendall(json.dumps(dict(request)).encode() + b"\n")
            line = self._lines.readline(LONGEST_LINE)
        if not line.endswith(b"\n"):
            raise ConnectionError("the rehearsal channel was closed by the simulated bench")
        answer: Mapping[str, Any] = json.loads(line)
        if "error" in answer:
            raise ValueError(f"the simulated bench refused {request.get('do')}: {answer['error']}")
        return answer


class ChannelClock:
    """Bench time of a rehearsal on a served bench."""

    virtual = True

    def __init__(self, channel: ChannelRehearsal) -> None:
        self._channel = channel

    def now_ns(self) -> int:
        """Virtual time in nanoseconds since the run's start."""
        return self._channel.request({"do": "now"})

    def sleep(self, duration_s: float) -> None:
        """Let bench time pass. Raises ValueError for a negative duration."""
        self._channel.request({"do": "sleep", "duration_ns": round(duration_s * 1e9)}, waits_s=duration_s)

    def align(self, start_ns: int) -> None:
        """Jump to `start_ns` if it is still to come."""
        self._channel.request({"do": "align", "start_ns": int(start_ns)})
