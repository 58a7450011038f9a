"""What drivers are put against. Put your own driver through the contract by adding an opponent for it to OPPONENTS.

An opponent opens a bench with one instrument on it, and gives the driver built over a session with that instrument.
"""

from __future__ import annotations

from collections import deque
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

import benchrun_sim

from benchrun.contract.hooks import DriverSpec
from benchrun.contract.roles import InstrumentSettings
from benchrun.drivers.dialects import dialect_for
from benchrun.drivers.registry import load_registry
from benchrun.visa.exchange import Exchange
from benchrun.visa.session import Bus, Session
from tests.sim.simulated_bench import balloon_wiring

RECIPES = Path(__file__).parents[2] / "recipes"
REGISTRY = load_registry()
CEILING_DBM = {"signal-source": 5.0, "wave-receiver": 10.0}
RAMP_DB = 6.0


@dataclass
class Bout:
    """One driver facing one instrument. `fail(n, kind)` makes the n-th exchange from now fail."""

    spec: DriverSpec
    driver: Any
    session: Session
    fail: Callable[[int, str], None]
    heal: Callable[[], None]
    simulated: Any = None
    said_before: int = 0

    @property
    def said(self) -> list[str]:
        """Everything that was said so far."""
        return [exchange.sent for exchange in self.session.exchanges]


@dataclass(frozen=True)
class Opponent:
    """How to meet one instrument: a name for the test report, the driver, and what opens the bout."""

    name: str
    driver: str
    enter: Callable[[DriverSpec], Any] = field(repr=False)

    @contextmanager
    def bout(self) -> Iterator[Bout]:
        """Open the bench, build the driver, and close everything afterwards."""
        with self.enter(REGISTRY.drivers[self.driver]) as bout:
            yield bout


def simulated(
    instrument: str, settings: InstrumentSettings, *, dialect: str | None = None, coherent: bool = True
) -> Any:
    """Return what opens a bout against an instrument of the simulated bench."""

    @contextmanager
    def enter(spec: DriverSpec) -> Iterator[Bout]:
        wiring = balloon_wiring(coherent=coherent)
        rehearsal = benchrun_sim.open_in_process(wiring, seed=1)
        transcript: deque[Exchange] = deque()
        with Bus(rehearsal.visa_library) as bus:
            session = bus.open(
                instrument,
                rehearsal.addresses[instrument],
                dialect_for(spec, RECIPES / dialect if dialect else None),
                clock=rehearsal.clock,
                ceiling_dbm=CEILING_DBM.get(spec.role),
                ramp_db=RAMP_DB,
                transcript=transcript,
            )
            faults = rehearsal.faults

            def fail(n: int, kind: str) -> None:
                faults.add(kind, at=faults.by_instrument[instrument] + n, instrument=instrument)

            yield Bout(spec, spec.build(session, settings), session, fail, faults.clear, rehearsal)

    return enter


def _settings(name: str, **given: Any) -> InstrumentSettings:
    return InstrumentSettings(name, **{"receivers": {}, "channels": {}, **given})


_WAVES = {"incident": "R3", "reflected": "R4"}
DIALECT = "simulated-wave-receiver.dialect.yaml"

OPPONENTS: list[Opponent] = [
    Opponent("simulated source", "signal-source", simulated("pump", _settings("pump"))),
    Opponent(
        "simulated receiver, coherent",
        "wave-receiver",
        simulated("analyser", _settings("analyser", receivers=_WAVES, source_port=2, coherent=True), dialect=DIALECT),
    ),
    Opponent(
        "simulated receiver, retuned",
        "wave-receiver",
        simulated("analyser", _settings("analyser", receivers=_WAVES, source_port=2), dialect=DIALECT, coherent=False),
    ),
    Opponent("simulated meter", "power-meter", simulated("meter", _settings("meter"))),
    Opponent(
        "simulated supply", "dc-supply", simulated("supply", _settings("supply", channels={"gate": 1, "drain": 2}))
    ),
    Opponent("simulated thermometer", "thermometer", simulated("ambient", _settings("ambient"))),
]


def of_role(role: str) -> list[Opponent]:
    """Return the opponents whose driver has this role."""
    return [one for one in OPPONENTS if REGISTRY.drivers[one.driver].role == role]
