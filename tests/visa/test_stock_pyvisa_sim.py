"""The session against devices that pyvisa-sim plays from a file: an opponent that none of us wrote."""

from __future__ import annotations

import struct
from collections.abc import Iterator
from pathlib import Path

import pytest

from benchrun.errors import InstrumentError, ReplyError
from benchrun.visa.session import Bus, Session
from tests.visa.scripted import StepClock
from tests.visa.test_session import dialect

pyvisa_sim = pytest.importorskip("pyvisa_sim")
DEVICES = Path(__file__).with_name("stock_devices.yaml")


@pytest.fixture(params=["inst0::INSTR", "5025::SOCKET"])
def session(request: pytest.FixtureRequest) -> Iterator[Session]:
    from pyvisa_sim.highlevel import SimVisaLibrary

    library = SimVisaLibrary(str(DEVICES))
    with Bus(library) as bus:
        yield bus.open(
            "source", f"TCPIP0::192.0.2.31::{request.param}", dialect(), clock=StepClock(), ceiling_dbm=0.0, ramp_db=6.0
        )


def test_the_device_answers(session: Session) -> None:
    assert session.confirm("frequency", frequency=2.2e9) == 2.2e9
    assert session.confirm("level", level=-10.0) == -10.0
    expected = struct.unpack(">2d", b"ABCDEFGH" * 2)
    assert tuple(session.block("data", 2)) == expected
    assert expected[0] == pytest.approx(2393736.541, abs=1e-3)


def test_the_device_did_not_take_it(session: Session) -> None:
    with pytest.raises(InstrumentError, match="did not take"):
        session.confirm("frequency", frequency=2.3e9)


def test_the_device_complains(session: Session) -> None:
    with pytest.raises(InstrumentError, match=r"-113.*after 'OUTP:STAT\?"):
        session.ask("output")


def test_a_message_that_the_device_does_not_know(session: Session) -> None:
    """It answers 'unknown', which is no answer by the standard: never taken for one."""
    with pytest.raises(ReplyError, match=r"source.*not an entry of the error queue"):
        session.ask("frequency")
    assert session.suspect
