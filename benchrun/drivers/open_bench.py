"""The bench, open: a driver for each instrument, reached by the full names that recipes use."""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from contextlib import suppress
from dataclasses import dataclass
from functools import partial
from types import MappingProxyType
from typing import cast

from benchrun.bench.model import Bench
from benchrun.contract.clock import Clock
from benchrun.contract.kinds import Settable
from benchrun.contract.roles import DcSupply, Identity, Instrument, InstrumentSettings, SignalSource, WaveReceiver
from benchrun.drivers.abandon import abandon
from benchrun.drivers.dialects import dialect_for
from benchrun.drivers.registry import Registry
from benchrun.errors import BenchError, FileProblemsError, IdentityError, InstrumentError, Problem, StoppedError
from benchrun.quantities import show
from benchrun.visa.dialect import Dialect
from benchrun.visa.session import Bus, Session

#: Roles in the order in which instruments are prepared: what sends RF is switched off before anything else is said.
PREPARED = ("signal-source", "wave-receiver", "dc-supply", "power-meter", "thermometer")


@dataclass(frozen=True, slots=True)
class Place:
    """Where a full name leads: the instrument's name, and the quantity as its driver calls it."""

    instrument: str
    quantity: str


class OpenBench:
    """Drivers of a bench by name, and its quantities by full name ("pump.level", "drain.voltage", "meter.power")."""

    def __init__(
        self,
        bench: Bench,
        drivers: Mapping[str, Instrument],
        sessions: Mapping[str, Session],
        identities: Mapping[str, Identity],
    ) -> None:
        self._bench = bench
        self._identities = identities
        self._settables = bench.settables()
        self._places: dict[str, Place] = {}
        self.instruments: Mapping[str, Instrument] = MappingProxyType(dict(drivers))
        self.sessions: Mapping[str, Session] = MappingProxyType(dict(sessions))

    def signal(self, name: str) -> SignalSource | WaveReceiver:
        """Return the driver of the instrument that this signal comes from. Raises InstrumentError."""
        return cast("SignalSource | WaveReceiver", self._driver(self._signal_instrument(name)))

    @property
    def receiver(self) -> WaveReceiver:
        """The wave receiver of the bench. Raises InstrumentError where there is none."""
        for name in self._bench.instruments:
            if self._bench.role(name) == "wave-receiver":
                return cast("WaveReceiver", self._driver(name))
        raise InstrumentError("the bench has no wave receiver; name one under `instruments:`")

    def supply(self, bias: str) -> DcSupply:
        """Return the supply that carries this bias. Raises InstrumentError."""
        if bias not in self._bench.bias:
            raise InstrumentError(f"the bench has no bias '{bias}'; it has {', '.join(self._bench.bias) or 'none'}")
        return cast("DcSupply", self._driver(self._bench.bias[bias].instrument))

    @property
    def supplies(self) -> Mapping[str, DcSupply]:
        """The supplies, by the instrument's name."""
        names = {bias.instrument for bias in self._bench.bias.values()}
        return {name: cast("DcSupply", self._driver(name)) for name in self._bench.instruments if name in names}

    def settable(self, target: str) -> Settable:
        """Return what can be set under a full name, with the range that the bench file allows.

        Raises InstrumentError.
        """
        try:
            return self._settables[target]
        except KeyError:
            known = ", ".join(self._settables)
            raise InstrumentError(f"nothing on the bench is set by the name '{target}'; it has {known}") from None

    def set(self, target: str, value: float) -> float:
        """Set a quantity (SI, dBm) by full name and return what stands.

        Raises BenchError; out of the bench's range nothing is sent.
        """
        self._in_range(self.settable(target), value)
        place = self._place(target)
        return self.instruments[place.instrument].set(place.quantity, value)

    def read(self, target: str) -> float:
        """Read a scalar (SI, dBm) by full name. Raises BenchError."""
        place = self._place(target)
        return self.instruments[place.instrument].read(place.quantity)

    def identities(self) -> Mapping[str, Identity]:
        """Return who answered, by the instrument's name."""
        return self._identities

    def prepare(self) -> None:
        """Bring every instrument to a known state, RF off first. Raises BenchError."""
        order = sorted(self.instruments, key=lambda name: PREPARED.index(self._bench.role(name)))
        for name in order:
            self.sessions[name].accept_restart()
            self.instruments[name].prepare()

    def restarted(self) -> tuple[str, ...]:
        """Names of instruments that were switched off and on since: prepare() comes before any setting."""
        return tuple(name for name, session in self.sessions.items() if session.restarted)

    def close(self) -> None:
        """Give the front panels back and close the links, whatever fails on the way. Nothing is switched on or off."""
        for session in self.sessions.values():
            with suppress(BenchError):
                if session.has("panel-lock") and not session.suspect:
                    session.confirm("panel-lock", on=False)
            session.close()

    def _signal_instrument(self, name: str) -> str:
        try:
            return self._bench.signals[name].instrument
        except KeyError:
            raise InstrumentError(
                f"the bench has no signal '{name}'; it has {', '.join(self._bench.signals)}"
            ) from None

    def _driver(self, name: str) -> Instrument:
        return self.instruments[name]

    def _place(self, full_name: str) -> Place:
        """Return where a full name leads, looked up once."""
        found = self._places.get(full_name)
        if found is None:
            found = self._places[full_name] = self._resolved(full_name)
        return found

    def _resolved(self, full_name: str) -> Place:
        """Resolve a full name: of a signal, of a bias, or of an instrument itself."""
        first, _, quantity = full_name.partition(".")
        if first in self._bench.signals and quantity in ("frequency", "level"):
            return Place(self._bench.signals[first].instrument, quantity)
        if first in self._bench.bias:
            return Place(self._bench.bias[first].instrument, full_name)
        if first in self.instruments and quantity:
            return Place(first, quantity)
        raise InstrumentError(f"nothing on the bench is called '{full_name}'")

    @staticmethod
    def _in_range(settable: Settable, value: float) -> None:
        if not math.isfinite(value):
            raise InstrumentError(f"{settable.name} = {value} is not a number that can be set. Nothing was sent")
        low = settable.low if settable.low is not None else value
        high = settable.high if settable.high is not None else value
        if not low <= value <= high:
            limits = [
                show(limit, settable.kind) if limit is not None else "any" for limit in (settable.low, settable.high)
            ]
            raise InstrumentError(
                f"{settable.name} = {show(value, settable.kind)} is outside what the bench file allows "
                f"({limits[0]} to {limits[1]}). Nothing was sent"
            )


def open_bench(
    bench: Bench, registry: Registry, bus: Bus, clock: Clock, addresses: Mapping[str, str] | None = None
) -> OpenBench:
    """Open every instrument of the bench, see that each is what the bench file says, and return the drivers.

    `addresses` replace those of the bench file, for a rehearsal. Nothing is set; where that fails, RF and drains of
    what answers are switched off. Raises FileProblemsError (a dialect), LinkError (nothing listens), IdentityError
    (another instrument answers).
    """
    dialects = _dialects(bench, registry)
    sessions: dict[str, Session] = {}

    def link(name: str) -> Session:
        if name not in sessions:
            sessions[name] = _open(bench, name, dialects[name], bus, clock, (addresses or {}).get(name))
        return sessions[name]

    absent = ""
    try:
        for absent in dialects:
            link(absent)
        absent = ""
        identities = {name: _identified(bench, registry, name, session) for name, session in sessions.items()}
    except BaseException as error:
        there = {name: partial(_identified_driver, bench, registry, name, link) for name in dialects if name != absent}
        off = abandon(bench, there)
        for session in sessions.values():
            session.close()
        if isinstance(error, KeyboardInterrupt):
            raise StoppedError(f"Stopped while the bench was opened. {off}") from error
        if isinstance(error, BenchError):
            error.args = (f"{str(error).rstrip('.')}. {off}",)
        raise
    drivers = {name: _driver(bench, registry, name, session) for name, session in sessions.items()}
    return OpenBench(bench, drivers, sessions, identities)


def _driver(bench: Bench, registry: Registry, name: str, session: Session) -> Instrument:
    return registry.drivers[bench.instruments[name].driver].build(session, settings_of(bench, name))


def _identified_driver(bench: Bench, registry: Registry, name: str, link: Callable[[str], Session]) -> Instrument:
    session = link(name)
    _identified(bench, registry, name, session)
    return _driver(bench, registry, name, session)


def settings_of(bench: Bench, name: str) -> InstrumentSettings:
    """Return what the bench file says of one instrument, for its driver."""
    instrument = bench.instruments[name]
    return InstrumentSettings(
        name=name,
        receivers={wave: one.receiver for wave, one in bench.receivers.items() if one.instrument == name},
        channels={bias: one.channel for bias, one in bench.bias.items() if one.instrument == name},
        source_port=instrument.source_port.number if instrument.source_port else None,
        coherent=instrument.tones == "coherent",
    )


def _dialects(bench: Bench, registry: Registry) -> dict[str, Dialect]:
    """Return the dialect of each instrument. Raises FileProblemsError with the mistakes of all."""
    dialects: dict[str, Dialect] = {}
    problems: list[Problem] = []
    for name, instrument in bench.instruments.items():
        spec = registry.drivers.get(instrument.driver)
        if spec is None:
            text = (
                f"{name}: no driver '{instrument.driver}' is installed. There is {', '.join(sorted(registry.drivers))}."
            )
            problems.append(Problem(str(bench.path), 0, 0, text))
            continue
        try:
            dialects[name] = dialect_for(spec, bench.dialect_path(name))
        except FileProblemsError as error:
            problems += error.problems
    if problems:
        raise FileProblemsError(problems)
    return dialects


def _open(bench: Bench, name: str, dialect: Dialect, bus: Bus, clock: Clock, address: str | None) -> Session:
    instrument = bench.instruments[name]
    return bus.open(
        name,
        address or instrument.address,
        dialect,
        clock=clock,
        ceiling_dbm=instrument.ceiling,
        ramp_db=instrument.ramp,
    )


def _identified(bench: Bench, registry: Registry, name: str, session: Session) -> Identity:
    """Ask who answers; raise IdentityError where it is not whom the bench file names, or not of the driver's kind."""
    identity = session.identify()
    expected = bench.instruments[name].identity
    for field in ("maker", "model", "serial") if expected else ():
        wanted, found = getattr(expected, field), getattr(identity, field)
        if wanted is not None and wanted != found:
            raise IdentityError(
                f"{session.where}: the bench file expects {field} '{wanted}'; {found!r} answers "
                f"({identity.maker} {identity.model}, serial {identity.serial}). "
                "Check the address, or correct the bench file"
            )
    spec = registry.drivers[bench.instruments[name].driver]
    strange = [] if session.understands_all(spec.needs) else session.not_understood(spec.needs, enough=1)
    if strange:
        raise IdentityError(
            f"{session.where}: {identity.maker} {identity.model} answers, and does not know {strange[0]!r}, which "
            f"driver {spec.name} needs. Check the address, the driver and the dialect in the bench file"
        )
    return identity
