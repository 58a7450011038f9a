"""A VISA library without any library under it: instruments are Python objects, and exchange n can be made to fail.

Independent of the simulated bench: it stands in for it where a test wants to say exactly what an instrument answers.
"""

from __future__ import annotations

import re
from collections.abc import Callable
from dataclasses import dataclass, field
from itertools import count
from typing import Any, ClassVar

from pyvisa import constants
from pyvisa.constants import ResourceAttribute, StatusCode
from pyvisa.highlevel import VisaLibraryBase
from pyvisa.util import LibraryPath

Fault = Callable[["Line", bytes], bytes | None]


@dataclass
class ScriptedInstrument:
    """Keeps settings by header and answers their queries; `answers` hold what is fixed, `limits` clip numbers.

    As IEEE 488.2 and SCPI-1999 want it: an unknown header ends the message with -113, and responses are joined by
    semicolons.
    """

    settings: dict[str, str] = field(default_factory=dict)
    answers: dict[str, bytes | Callable[[], bytes]] = field(default_factory=dict)
    limits: dict[str, tuple[float, float]] = field(default_factory=dict)
    errors: list[str] = field(default_factory=list)
    heard: list[str] = field(default_factory=list)
    events: int = 0

    def receive(self, message: str) -> bytes:
        """Run one program message and return its response."""
        self.heard.append(message)
        responses: list[bytes] = []
        for unit in message.split(";"):
            header, _, parameters = unit.strip().removeprefix(":").partition(" ")
            if not self._run(header, parameters, responses):
                self.errors.append(f'-113,"Undefined header;{header}"')
                break
        return b";".join(responses) + b"\n" if responses else b""

    def _run(self, header: str, parameters: str, responses: list[bytes]) -> bool:
        if header == "SYST:ERR?":
            responses.append((self.errors.pop(0) if self.errors else '0,"No error"').encode())
        elif header == "*OPC?":
            responses.append(b"1")
        elif header == "*ESR?":
            responses.append(str(self.events).encode())
            self.events = 0
        elif header in self.answers:
            answer = self.answers[header]
            responses.append(answer() if callable(answer) else answer)
        elif header.removesuffix("?") in self.settings:
            if header.endswith("?"):
                responses.append(self.settings[header[:-1]].encode())
            else:
                self._keep(header, parameters)
        else:
            return False
        return True

    def _keep(self, header: str, parameters: str) -> None:
        bare = re.sub(r" [A-Z]+(?=,|$)", "", parameters)
        if header in self.limits:
            low, high = self.limits[header]
            bare = repr(min(max(float(bare), low), high))
        self.settings[header] = bare


@dataclass
class Line:
    """One open session: what waits to be read."""

    instrument: Any
    address: str
    output: bytearray = field(default_factory=bytearray)
    attributes: dict[Any, Any] = field(default_factory=dict)


class ScriptedLibrary(VisaLibraryBase):
    """Reaches scripted instruments by address. `faults` maps the number of a write (from 0) to what happens then."""

    _numbers: ClassVar[Any] = count()
    instruments: dict[str, Any]
    faults: dict[int, Fault]

    @classmethod
    def of(cls, **instruments: Any) -> ScriptedLibrary:
        """Return a library of its own whose instruments are reached as TCPIP0::<name>::inst0::INSTR."""
        library: ScriptedLibrary = cls(LibraryPath(f"scripted-{next(cls._numbers)}"))  # type: ignore[assignment]
        library.instruments = {address_of(name): instrument for name, instrument in instruments.items()}
        return library

    def _init(self) -> None:
        self.lines: dict[int, Line] = {}
        self.faults = {}
        self.writes = 0
        self.story: list[str] = []
        self._handles = count(100)

    def open_default_resource_manager(self) -> tuple[Any, StatusCode]:
        return 1, StatusCode.success

    def open(
        self, session: Any, resource_name: str, access_mode: Any = 0, open_timeout: Any = 0
    ) -> tuple[Any, StatusCode]:
        if resource_name not in self.instruments:
            return 0, self.handle_return_value(None, StatusCode.error_resource_not_found)
        handle = next(self._handles)
        self.lines[handle] = Line(self.instruments[resource_name], resource_name)
        self.story.append(f"open {resource_name}")
        return handle, StatusCode.success

    def close(self, session: Any) -> StatusCode:
        line = self.lines.pop(session, None)
        self.story.append(f"close {line.address}" if line else f"close manager {session}")
        return StatusCode.success

    def clear(self, session: Any) -> StatusCode:
        self.lines[session].output.clear()
        self.story.append("clear")
        return StatusCode.success

    def write(self, session: Any, data: bytes) -> tuple[int, StatusCode]:
        line = self.lines[session]
        fault = self.faults.pop(self.writes, None)
        self.writes += 1
        assert data.endswith(b"\n")
        answer = fault(line, data) if fault else None
        if answer is None:
            answer = line.instrument.receive(data[:-1].decode("ascii"))
        line.output += answer
        return len(data), StatusCode.success

    def read(self, session: Any, count: int) -> tuple[bytes, StatusCode]:
        line = self.lines[session]
        if not line.output:
            return b"", self.handle_return_value(session, StatusCode.error_timeout)
        length = min(count, len(line.output))
        end, status = length, StatusCode.success if length == len(line.output) else StatusCode.success_max_count_read
        if line.attributes.get(ResourceAttribute.termchar_enabled) and b"\n" in line.output[:length]:
            end, status = line.output.index(b"\n") + 1, StatusCode.success_termination_character_read
        data = bytes(line.output[:end])
        del line.output[:end]
        return data, self.handle_return_value(session, status)

    def get_attribute(self, session: Any, attribute: Any) -> tuple[Any, StatusCode]:
        return self.lines[session].attributes.get(attribute, 0), StatusCode.success

    def set_attribute(self, session: Any, attribute: Any, attribute_state: Any) -> StatusCode:
        self.lines[session].attributes[attribute] = attribute_state
        return StatusCode.success

    def disable_event(self, session: Any, event_type: Any, mechanism: Any) -> StatusCode:
        return StatusCode.success

    def discard_events(self, session: Any, event_type: Any, mechanism: Any) -> StatusCode:
        return StatusCode.success


def address_of(name: str) -> str:
    """Return the address under which a scripted instrument is reached."""
    return f"TCPIP0::{name}::inst0::INSTR"


# What can happen to exchange n.


def silence(line: Line, data: bytes) -> bytes:
    """No answer: reading runs into the deadline."""
    return b""


def reset(line: Line, data: bytes) -> bytes:
    """The other end resets the connection."""
    raise ConnectionResetError(104, "Connection reset by peer")


def lost(line: Line, data: bytes) -> bytes:
    """The library says that the connection is lost."""
    from pyvisa import VisaIOError

    raise VisaIOError(constants.VI_ERROR_CONN_LOST)


def garbage(line: Line, data: bytes) -> bytes:
    """Bytes that are no text."""
    return b"\xff\xfe\x00garbage\n"


def half(line: Line, data: bytes) -> bytes:
    """Half of the answer, then the end (nothing of a single character: that would be the whole of it)."""
    answer = line.instrument.receive(data[:-1].decode("ascii"))
    return bytes(answer[: len(answer) // 2]) if len(answer) > 2 else b""


def interrupt(line: Line, data: bytes) -> bytes:
    """Somebody presses Ctrl-C in the middle of the exchange."""
    raise KeyboardInterrupt


FAULTS: dict[str, Fault] = {"silence": silence, "reset": reset, "lost": lost, "garbage": garbage, "half": half}


class StepClock:
    """A virtual clock that counts what is slept."""

    virtual = True

    def __init__(self) -> None:
        self.ns = 0

    def now_ns(self) -> int:
        return self.ns

    def sleep(self, duration_s: float) -> None:
        self.ns += round(duration_s * 1e9)

    def align(self, start_ns: int) -> None:
        self.ns = max(self.ns, start_ns)
