"""Roles of instruments, as protocols. A driver is a class for one role, built over a Link by its plugin.

Rules that every driver keeps, and that tests/contract/ checks on any driver:
- no preset or reset, ever; prepare() sets each setting the driver relies on;
- every setting is read back; the value that stands is returned;
- make_safe() may be called at any time and in any state, twice, and never raises for what is already safe;
- nothing but the Link is used to talk, so that deadlines, ceilings, ramps and error queues hold.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Protocol, runtime_checkable

from benchrun.contract.capture import Capture, FloatArray, WaveData
from benchrun.contract.clock import Clock
from benchrun.contract.kinds import Readable, Settable

#: A value for a placeholder of a dialect entry: what its kind says, or several of that kind where the entry takes a
#: list.
Value = float | str | bool | Sequence[float] | Sequence[str]
#: One use of a dialect entry: its name and the values for its placeholders.
Call = tuple[str, Mapping[str, Value]]

ROLES = ("wave-receiver", "signal-source", "power-meter", "dc-supply", "thermometer")


@dataclass(frozen=True, slots=True)
class Identity:
    """Who answered: the four fields of *IDN? (IEEE 488.2 10.14), and what *OPT? said, "" where it did not answer."""

    maker: str
    model: str
    serial: str
    firmware: str
    options: str = ""


class Link(Protocol):
    """The only way a driver talks: dialect entries with typed values, never text.

    `send` writes an entry's set form, waits for completion (*OPC?) and drains SYSTem:ERRor?; `ask` sends an entry's
    query form and returns the reply by its declared kind (float, str, or bool for a switch); `block` reads a
    definite-length REAL,64 block of exactly `count` float64. All raise the errors of benchrun.errors.BenchError.
    A value of kind "level" above the bench's ceiling is refused (InstrumentError before anything is sent), and a level
    that rises is raised in steps of the bench's ramp.
    """

    @property
    def name(self) -> str:
        """Name of the instrument on the bench."""

    @property
    def clock(self) -> Clock:
        """Clock to wait on."""

    def has(self, entry: str) -> bool:
        """Whether the dialect knows this entry."""

    def send(self, entry: str, *, deadline_s: float | None = None, **values: Value) -> None:
        """Write the entry's set form and see it completed and free of errors."""

    def ask(self, entry: str, *, deadline_s: float | None = None, **values: Value) -> Any:
        """Return the typed reply to the entry's query form."""

    def confirm(self, entry: str, *, deadline_s: float | None = None, **values: Value) -> Any:
        """Send the set form, read the query form back in the same exchange, and return what stands.

        Raises InstrumentError when what stands differs from what was sent by more than the entry's tolerance.
        """

    def block(self, entry: str, count: int, *, deadline_s: float | None = None, **values: Value) -> FloatArray:
        """Return exactly `count` float64 from the entry's definite-length block."""

    def exchange(
        self, sets: Sequence[Call], asks: Sequence[Call] = (), *, deadline_s: float | None = None
    ) -> tuple[Any, ...]:
        """Send set forms in order, see them completed, and return the replies to several queries, in one message.

        What send, ask and confirm do one by one; one message costs one wait for the answer.
        """

    def confirm_all(self, calls: Sequence[Call], *, deadline_s: float | None = None) -> tuple[Any, ...]:
        """Do confirm() for several entries in one message; returns what stands, in the same order."""

    def sweep_s(self, points: int, if_bandwidth_hz: float) -> float:
        """Return the time (s) that a sweep of so many points takes, by the dialect's timing."""

    def identify(self) -> Identity:
        """Ask *IDN? (and *OPT? where the dialect says it is answered)."""


@dataclass(frozen=True, slots=True)
class InstrumentSettings:
    """What the bench file says of one instrument, plain: passed to the driver's constructor.

    `receivers` maps wave names to the instrument's receivers ("reflected": "R4"); `channels` maps bias names to
    output channels ("drain": 2); `source_port` is where the probe leaves.
    """

    name: str
    receivers: Mapping[str, str]
    channels: Mapping[str, int]
    source_port: int | None = None
    coherent: bool = False


@runtime_checkable
class Instrument(Protocol):
    """What all roles share."""

    @property
    def settables(self) -> Mapping[str, Settable]:
        """Quantities that set() takes, by name."""

    @property
    def readables(self) -> Mapping[str, Readable]:
        """Scalars that read() gives, by name."""

    def identify(self) -> Identity:
        """Say who answers."""

    def prepare(self) -> None:
        """Bring every setting the driver relies on to a known value, RF and outputs off, without a preset."""

    def set(self, quantity: str, value: float) -> float:
        """Set one quantity (SI) and return the value read back."""

    def read(self, quantity: str) -> float:
        """Read one scalar (SI)."""

    def make_safe(self) -> None:
        """Put the instrument in its safe state and read that back; raise BenchError where it cannot be confirmed."""


@runtime_checkable
class SignalSource(Instrument, Protocol):
    """A generator: settables frequency, level; RF is switched only by output()."""

    def output(self, on: bool) -> None:
        """Switch RF, read back."""

    def locked(self) -> bool:
        """Whether the common reference is locked."""

    def load_list(self, frequencies_hz: Sequence[float], levels_dbm: Sequence[float]) -> None:
        """Load points that advance on the trigger line. Raises InstrumentError where the dialect has no list."""

    def leave_list(self) -> None:
        """Go back to fixed frequency."""


@runtime_checkable
class WaveReceiver(Instrument, Protocol):
    """An analyser with receiver access and a source of its own (the probe): settables frequency, level."""

    def output(self, on: bool) -> None:
        """Switch the source's RF, read back."""

    def locked(self) -> bool:
        """Whether the common reference is locked."""

    def configure(self, capture: Capture) -> None:
        """Set grid, tones, waves, IF bandwidth and averaging; does nothing where they already stand."""

    def acquire(self) -> WaveData:
        """Make one single sweep as configured and return the raw waves."""


@runtime_checkable
class DcSupply(Instrument, Protocol):
    """A supply with named outputs (bias names, "gate", "drain"): settables "<bias>.voltage", "<bias>.current-limit".

    Readables "<bias>.voltage", "<bias>.current". make_safe() is not used on a supply as a whole: the order matters, so
    acquire/safe_state switches one output at a time with output().
    """

    def program_trips(self, bias: str, *, current_limit_a: float, over_voltage_v: float, over_current: bool) -> None:
        """Program current limit, over-voltage trip and over-current trip and read all three back."""

    def output(self, bias: str, on: bool) -> None:
        """Switch one output, read back."""

    def tripped(self, bias: str) -> bool:
        """Whether a protection of this output has tripped."""


@runtime_checkable
class PowerMeter(Instrument, Protocol):
    """A power meter with one sensor: settable frequency (calibration factor), readable power (dBm)."""


@runtime_checkable
class Thermometer(Instrument, Protocol):
    """Reads temperature (degree Celsius)."""
