"""A SCPI instrument: a table of commands, its settings, and the execution of program messages.

Rules kept here (IEEE 488.2 sections 6 and 7, SCPI-1999 volume 1 sections 4 and 6):
- a message's units run in order; the header path is that of the unit before, a leading colon starts at the root, and
  common commands leave it alone;
- a command error ends the message; an execution error ends only its unit;
- responses of one message are joined by semicolons;
- a sweep that was started runs on beside the next messages; *OPC, *OPC? and *WAI wait for it.
"""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from typing import Any, ClassVar, Protocol
from zlib import crc32

from .scpi_command import Command
from .scpi_common import COMMON
from .scpi_errors import ScpiError
from .scpi_headers import CommandTable
from .scpi_lexer import Token, Unit, units
from .scpi_status import MASTER_SUMMARY, OPERATION_COMPLETE, Status
from .scpi_values import Parameter

MESSAGE_NS = 1_000_000
Key = tuple[Any, ...]


class Bench(Protocol):
    """What an instrument needs of the bench it stands on."""

    @property
    def world(self) -> Any:
        """The physics."""

    def advance(self, duration_ns: int) -> None:
        """Let virtual time pass."""

    def disturb(self) -> None:
        """Say that RF has changed: a supply's protection may trip."""

    def pulse(self, count: int) -> Mapping[str, tuple[tuple[float, ...], tuple[float, ...]]]:
        """Send trigger pulses; return the frequencies and levels that each source in list mode steps through."""


class Instrument:
    """Base of the simulated instruments. Subclasses give MAKER, MODEL, COMMANDS, and changed()."""

    MAKER: ClassVar[str]
    MODEL: ClassVar[str]
    FIRMWARE: ClassVar[str] = "1.0"
    COMMANDS: ClassVar[tuple[Command, ...]] = ()
    status: Status
    byte_order: str = ">"
    _tables: ClassVar[dict[type, CommandTable[Command]]] = {}

    def __init__(self, name: str, wiring: Mapping[str, Any], bench: Bench) -> None:
        self.name = name
        self.wiring = wiring
        self.bench = bench
        self.settings: dict[Key, Any] = {}
        self.panel_locked = False
        self.busy_until_ns: int | None = None
        self._completion_wanted = False
        self.service_rises = 0  # how often the master summary has risen, so that a fall and rise in one message is seen
        self._summary = False
        self.power_on()

    # ---- life -------------------------------------------------------------------------------------------------

    @property
    def table(self) -> CommandTable[Command]:
        """All headers of this kind of instrument."""
        kind = type(self)
        if kind not in Instrument._tables:
            Instrument._tables[kind] = CommandTable((*COMMON, *self.COMMANDS))
        return Instrument._tables[kind]

    def power_on(self) -> None:
        """Start as after switching on: registers fresh, the power-on event set, settings at their *RST values."""
        self.status = Status()
        self.panel_locked = False
        self.reset()

    def reset(self) -> None:
        """*RST: every setting to its reset value, pending operations forgotten."""
        self.busy_until_ns, self._completion_wanted = None, False
        for command in self.COMMANDS:
            if command.setting is not None:
                for suffixes in _all_suffixes(command.suffix_limits):
                    self.settings[(command.setting.key, *suffixes)] = command.setting.after_reset(self, suffixes)
        self.after_reset()

    def after_reset(self) -> None:
        """Tell the world how things stand after *RST."""

    def value(self, key: str, *suffixes: int) -> Any:
        """Return a setting."""
        return self.settings[(key, *suffixes)]

    def put(self, key: str, suffixes: tuple[int, ...], value: Any) -> None:
        """Keep a setting and let the instrument act on it."""
        self.settings[(key, *suffixes)] = value
        self.changed(key, *suffixes)

    def changed(self, key: str, *suffixes: int) -> None:
        """Act on a setting that has just been changed."""

    @property
    def identity(self) -> str:
        """Answer to *IDN?."""
        return f"{self.MAKER},{self.MODEL},{crc32(self.name.encode()) % 100_000:05d},{self.FIRMWARE}"

    @property
    def options(self) -> str:
        """Answer to *OPT?; 0 means none (IEEE 488.2 10.20)."""
        return "0"

    # ---- time -------------------------------------------------------------------------------------------------

    @property
    def now_ns(self) -> int:
        """Virtual time."""
        return int(self.bench.world.now_ns)

    def busy_for(self, duration_ns: int) -> None:
        """Begin an operation that runs beside the next messages."""
        self.busy_until_ns = self.now_ns + duration_ns

    def settle(self) -> None:
        """Notice whether a pending operation has ended by now, and whatever else time has brought."""
        if self.busy_until_ns is not None and self.now_ns >= self.busy_until_ns:
            self.busy_until_ns = None
            self.finished()
        if self.busy_until_ns is None and self._completion_wanted:
            self._completion_wanted = False
            self.status.events |= OPERATION_COMPLETE

    def finished(self) -> None:
        """A pending operation has just ended."""

    def wait(self) -> None:
        """Let time pass until nothing is pending."""
        if self.busy_until_ns is not None:
            self.bench.advance(max(0, self.busy_until_ns - self.now_ns))
            self.settle()

    def want_completion(self) -> None:
        """*OPC: set the operation-complete bit when nothing is pending any more."""
        self._completion_wanted = True
        self.settle()

    def forget_completion(self) -> None:
        """A device clear and *CLS forget a pending *OPC."""
        self._completion_wanted = False

    def disturbed(self) -> None:
        """Something on the bench has changed that this instrument did not do."""

    # ---- messages ---------------------------------------------------------------------------------------------

    def execute(self, message: str) -> bytes:
        """Run one program message and return the response message with its line feed, or nothing.

        Errors go into the queue, never to the caller.
        """
        self.bench.advance(MESSAGE_NS)
        self.settle()
        answers: list[bytes] = []
        try:
            self._run(message, answers)
        except ScpiError as error:
            self.status.error(error.number, error.detail)
        self.settle()
        self._watch_summary()
        return b";".join(answers) + b"\n" if answers else b""

    def by_hand(self, message: str) -> bool:
        """Do at the front panel what `message` says; False where the panel is locked."""
        if self.panel_locked:
            return False
        self.execute(message)
        return True

    def _run(self, message: str, answers: list[bytes]) -> None:
        path, closed = "", False
        for unit in units(message):
            full = _full_header(unit.header, path)
            if not full.startswith("*"):
                path = full.rpartition(":")[0]
            command, suffixes = self.table.find(full)
            if unit.query and closed:
                raise ScpiError(-440, full[:60])
            try:
                self._perform(unit, command, suffixes, answers)
            except ScpiError as error:
                if error.number > -200:
                    raise
                self.status.error(error.number, error.detail)
            closed = closed or (unit.query and command.indefinite)
            self._watch_summary()

    def _watch_summary(self) -> None:
        summary = bool(self.status.service_enable and self.status.byte(message_available=False) & MASTER_SUMMARY)
        self.service_rises += summary and not self._summary
        self._summary = summary

    def _perform(self, unit: Unit, command: Command, suffixes: tuple[int, ...], answers: list[bytes]) -> None:
        if unit.query:
            if command.ask is None:
                raise ScpiError(-113, unit.header[:60] + "?")
            values = _values(unit.tokens, command.query_parameters, self, suffixes, optional=command.optional)
            answer = command.ask(self, *suffixes, *values)
            answers.append(answer if isinstance(answer, bytes) else answer.encode("latin-1"))
            return
        if command.act is None:
            raise ScpiError(-113, unit.header[:60])
        command.act(self, *suffixes, *_values(unit.tokens, command.parameters, self, suffixes, optional=False))
        if command.duration_ns:
            self.bench.advance(command.duration_ns)


def _full_header(header: str, path: str) -> str:
    if header.startswith("*"):
        return header
    if header.startswith(":"):
        return header[1:]
    return f"{path}:{header}" if path else header


def _values(
    tokens: tuple[Token, ...],
    parameters: tuple[Parameter, ...],
    owner: Any,
    suffixes: tuple[int, ...],
    *,
    optional: bool,
) -> Iterable[Any]:
    if not tokens and optional:
        return ()
    if len(tokens) < len(parameters):
        raise ScpiError(-109)
    if len(tokens) > len(parameters) and not (parameters and parameters[-1].many):
        raise ScpiError(-108, tokens[len(parameters)].text[:20])
    return [
        parameter.read(tokens[index:] if parameter.many else tokens[index : index + 1], owner, suffixes)
        for index, parameter in enumerate(parameters)
    ]


def _all_suffixes(limits: tuple[int, ...]) -> Iterable[tuple[int, ...]]:
    if not limits:
        return [()]
    return [(first, *rest) for first in range(1, limits[0] + 1) for rest in _all_suffixes(limits[1:])]
