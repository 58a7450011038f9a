"""Who answers at an address, and which driver fits: queries only."""

from __future__ import annotations

import pytest

from benchrun.drivers.identify import identify
from benchrun.errors import LinkError
from tests.drivers.conftest import Rehearsed

ROLES = {
    "pump": "signal-source",
    "analyser": "wave-receiver",
    "meter": "power-meter",
    "supply": "dc-supply",
    "ambient": "thermometer",
}


@pytest.mark.parametrize("name", ROLES)
def test_the_driver_that_fits(rehearsed: Rehearsed, name: str) -> None:
    address = rehearsed.rehearsal.addresses[name]
    settings = dict(rehearsed.rehearsal.rack.instruments[name].settings)
    finding = identify(address, rehearsed.registry, rehearsed.bus, rehearsed.rehearsal.clock)
    assert finding.best is not None
    assert finding.best.driver == ROLES[name]
    assert finding.identity.model == rehearsed.rehearsal.rack.instruments[name].MODEL
    assert all(not fit.fits for fit in finding.fits[1:])
    assert rehearsed.rehearsal.rack.instruments[name].settings == settings
    assert rehearsed.rehearsal.visa_library._sessions == {}


def test_what_is_left_to_a_dialect_file(rehearsed: Rehearsed) -> None:
    finding = identify(
        rehearsed.rehearsal.addresses["analyser"], rehearsed.registry, rehearsed.bus, rehearsed.rehearsal.clock
    )
    assert finding.best is not None
    assert finding.best.left_open == ("source-port", "waves", "offsets", "capture", "data", "limits")


def test_what_is_not_answered(rehearsed: Rehearsed) -> None:
    """A source without a reference input still fits; what it lacks is told."""
    rack = rehearsed.rehearsal.rack
    table = type(rack.instruments["pump"])
    lacking = type("Lacking", (table,), {"COMMANDS": tuple(c for c in table.COMMANDS if "ROSC" not in c.header)})
    rack.instruments["pump"].__class__ = lacking
    finding = identify(
        rehearsed.rehearsal.addresses["pump"], rehearsed.registry, rehearsed.bus, rehearsed.rehearsal.clock
    )
    assert finding.best is not None
    assert finding.best.driver == "signal-source"
    assert finding.best.optional_unanswered == ("reference",)


def test_nobody(rehearsed: Rehearsed) -> None:
    with pytest.raises(LinkError, match="cannot be opened"):
        identify("TCPIP0::192.0.2.99::inst0::INSTR", rehearsed.registry, rehearsed.bus, rehearsed.rehearsal.clock)
