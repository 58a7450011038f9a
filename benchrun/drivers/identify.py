"""Who answers at an address, which of the installed drivers fits, and what is not answered.

Queries only: nothing is set.
"""

from __future__ import annotations

from dataclasses import dataclass

from benchrun.contract.clock import Clock
from benchrun.contract.hooks import DriverSpec
from benchrun.contract.roles import Identity
from benchrun.drivers.dialects import parse_dialect
from benchrun.drivers.registry import Registry
from benchrun.visa.dialect import Dialect, compile_dialect
from benchrun.visa.session import Bus, Session

#: A driver is given up after this many of its needed entries were not understood.
GIVEN_UP = 2


@dataclass(frozen=True, slots=True)
class Fit:
    """How one driver fits: needed and optional entries that were not understood, and those left to a dialect file."""

    driver: str
    unanswered: tuple[str, ...]
    optional_unanswered: tuple[str, ...]
    left_open: tuple[str, ...]

    @property
    def fits(self) -> bool:
        """Whether everything that could be asked was understood."""
        return not self.unanswered


@dataclass(frozen=True, slots=True)
class Finding:
    """Who answers, and how each installed driver fits, the best first."""

    address: str
    identity: Identity
    fits: tuple[Fit, ...]

    @property
    def best(self) -> Fit | None:
        """The driver that fits, None where none does."""
        return self.fits[0] if self.fits and self.fits[0].fits else None


def identify(address: str, registry: Registry, bus: Bus, clock: Clock) -> Finding:
    """Ask who answers and try the queries of every installed driver.

    Raises LinkError (nothing listens), NoAnswerError or ReplyError (*IDN? is not answered as IEEE 488.2 has it).
    """
    session = bus.open("instrument", address, Dialect({}), clock=clock)
    try:
        identity = session.identify()
    finally:
        session.close()
    fits = [_fit(address, spec, bus, clock) for spec in registry.drivers.values()]
    return Finding(address, identity, tuple(sorted(fits, key=lambda fit: _rank(fit, registry))))


def _rank(fit: Fit, registry: Registry) -> tuple[int, int, int]:
    """Order: fewest entries not understood; then the driver of which most could be asked."""
    asked = len(registry.drivers[fit.driver].needs) - len(fit.left_open)
    return len(fit.unanswered), -asked, len(fit.optional_unanswered)


def _fit(address: str, spec: DriverSpec, bus: Bus, clock: Clock) -> Fit:
    dialect, _ = compile_dialect(parse_dialect(spec.dialect, f"dialect of driver {spec.name}"))
    session = bus.open("instrument", address, dialect, clock=clock)
    try:
        return _tried(session, spec)
    finally:
        session.close()


def _tried(session: Session, spec: DriverSpec) -> Fit:
    left_open = tuple(entry for entry in spec.needs if not session.has(entry))
    unanswered = session.not_understood(spec.needs, enough=GIVEN_UP)
    optional = [] if unanswered else session.not_understood(spec.optional)
    return Fit(spec.name, tuple(unanswered), tuple(optional), left_open)
