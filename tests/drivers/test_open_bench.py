"""The bench opened: full names, ranges, identities, what happens when another instrument answers."""

from __future__ import annotations

import pytest

from benchrun.bench.instruments import ExpectedIdentity
from benchrun.contract.roles import DcSupply, SignalSource, WaveReceiver
from benchrun.errors import FileProblemsError, IdentityError, InstrumentError, LinkError
from tests.drivers.conftest import Rehearsed


def test_who_is_there(rehearsed: Rehearsed) -> None:
    opened = rehearsed.open()
    assert list(opened.instruments) == ["pump", "analyser", "meter", "supply", "ambient"]
    assert {name: one.model for name, one in opened.identities().items()}["pump"] == "Fell-6"
    assert isinstance(opened.signal("pump"), SignalSource)
    assert isinstance(opened.signal("probe"), WaveReceiver)
    assert opened.receiver is opened.signal("probe")
    assert isinstance(opened.supply("drain"), DcSupply)
    assert opened.supplies == {"supply": opened.supply("gate")}
    assert opened.restarted() == ()


def test_opening_sets_nothing(rehearsed: Rehearsed) -> None:
    """A set form has a parameter; what is said while opening are questions."""
    opened = rehearsed.open()
    for session in opened.sessions.values():
        for exchange in session.exchanges:
            assert all(unit.endswith("?") for unit in exchange.sent.split(";")), exchange.sent


def test_preparing_switches_rf_off_before_all_else(rehearsed: Rehearsed) -> None:
    opened = rehearsed.open()
    instruments = rehearsed.rehearsal.rack.instruments
    assert instruments["analyser"].value("output")  # as after switching on
    opened.prepare()
    assert not instruments["analyser"].value("output")
    assert not instruments["pump"].value("output")
    assert instruments["pump"].panel_locked
    opened.close()
    assert not instruments["pump"].panel_locked


def test_full_names(rehearsed: Rehearsed) -> None:
    opened = rehearsed.open()
    opened.prepare()
    sent = {
        "pump.frequency": 2.3e9,
        "probe.level": -20.0,
        "gate.voltage": -4.0,
        "drain.current-limit": 2.0,
        "meter.frequency": 2.3e9,
    }
    for name, value in sent.items():
        assert opened.set(name, value) == pytest.approx(value)
    instruments = rehearsed.rehearsal.rack.instruments
    assert instruments["pump"].value("frequency") == 2.3e9
    assert instruments["analyser"].value("level") == -20.0
    assert instruments["supply"].value("voltage", 1) == -4.0
    assert opened.read("ambient.temperature") == pytest.approx(23.0, abs=5.0)
    assert opened.read("drain.current") == pytest.approx(0.0, abs=1e-3)
    assert opened.read("meter.power") < 0.0


@pytest.mark.parametrize("name", ["pmup.level", "pump", "pump.volume", "drain.frequency", "", "meter.power"])
def test_names_that_cannot_be_set(rehearsed: Rehearsed, name: str) -> None:
    opened = rehearsed.open()
    with pytest.raises(InstrumentError, match=r"it has pump.frequency"):
        opened.set(name, 1.0)


@pytest.mark.parametrize("name", ["pmup.level", "pump", "ambient.colour", "drain.level"])
def test_names_that_cannot_be_read(rehearsed: Rehearsed, name: str) -> None:
    with pytest.raises(InstrumentError):
        rehearsed.open().read(name)


@pytest.mark.parametrize(
    ("name", "value"),
    [
        ("pump.frequency", 7e9),
        ("pump.level", 5.5),
        ("gate.voltage", 0.1),
        ("drain.voltage", 30.1),
        ("drain.current-limit", 3.1),
        ("pump.level", float("nan")),
    ],
)
def test_out_of_the_bench_files_range_nothing_is_sent(rehearsed: Rehearsed, name: str, value: float) -> None:
    opened = rehearsed.open()
    opened.prepare()
    before = {one: len(session.exchanges) for one, session in opened.sessions.items()}
    with pytest.raises(InstrumentError, match=r"Nothing was sent"):
        opened.set(name, value)
    assert {one: len(session.exchanges) for one, session in opened.sessions.items()} == before


def test_names_of_nothing(rehearsed: Rehearsed) -> None:
    opened = rehearsed.open()
    with pytest.raises(InstrumentError, match=r"no signal 'pmup'; it has pump, probe"):
        opened.signal("pmup")
    with pytest.raises(InstrumentError, match=r"no bias 'base'; it has gate, drain"):
        opened.supply("base")


class TestAnotherInstrument:
    def test_another_kind(self, rehearsed: Rehearsed) -> None:
        addresses = rehearsed.rehearsal.addresses
        with pytest.raises(
            IdentityError, match=r"pump \(TCPIP0::.+\): Ostrelby Beck-1 answers, and does not know '(frequency|level)'"
        ):
            rehearsed.open(pump=addresses["meter"])
        with pytest.raises(IdentityError, match=r"meter \(TCPIP0::.+\): Quillfen Works Fell-6 answers"):
            rehearsed.open(meter=addresses["pump"])
        with pytest.raises(
            IdentityError, match=r"pump \(.+\): Larkmoor Instruments Tarn-4 answers, and does not know 'frequency'"
        ):
            rehearsed.open(pump=addresses["analyser"])

    def test_another_one_of_the_same_kind(self, rehearsed: Rehearsed) -> None:
        bench = rehearsed.bench
        identity = ExpectedIdentity(maker="Quillfen Works", serial="00001")
        pump = bench.instruments["pump"].model_copy(update={"identity": identity})
        rehearsed.bench = bench.model_copy(update={"instruments": {**bench.instruments, "pump": pump}})
        rehearsed.bench._path = bench.path
        with pytest.raises(IdentityError, match=r"expects serial '00001'; '89709' answers \(Quillfen Works Fell-6"):
            rehearsed.open()

    def test_nobody(self, rehearsed: Rehearsed) -> None:
        with pytest.raises(LinkError, match=r"pump \(TCPIP0::192.0.2.99::inst0::INSTR\): cannot be opened"):
            rehearsed.open(pump="TCPIP0::192.0.2.99::inst0::INSTR")

    def test_what_was_opened_is_closed(self, rehearsed: Rehearsed) -> None:
        with pytest.raises(LinkError):
            rehearsed.open(ambient="TCPIP0::192.0.2.99::inst0::INSTR")
        assert rehearsed.rehearsal.visa_library._sessions == {}


def test_a_driver_that_is_not_installed(rehearsed: Rehearsed) -> None:
    bench = rehearsed.bench
    pump = bench.instruments["pump"].model_copy(update={"driver": "sygnal-source"})
    rehearsed.bench = bench.model_copy(update={"instruments": {**bench.instruments, "pump": pump}})
    rehearsed.bench._path = bench.path
    with pytest.raises(FileProblemsError, match=r"no driver 'sygnal-source' is installed. There is dc-supply"):
        rehearsed.open()


def test_a_restart_is_noticed_and_stops_everything_but_off(rehearsed: Rehearsed) -> None:
    opened = rehearsed.open()
    opened.prepare()
    opened.set("pump.level", -20.0)
    rehearsed.rehearsal.faults.add(
        "power-cycle", at=1 + rehearsed.rehearsal.faults.by_instrument["pump"], instrument="pump"
    )
    with pytest.raises(LinkError):
        opened.signal("pump").output(on=True)
    with pytest.raises(InstrumentError, match=r"or it was switched off and on"):
        opened.signal("pump").output(on=True)
    with pytest.raises(InstrumentError, match=r"its settings are gone"):
        opened.signal("pump").output(on=True)
    opened.instruments["pump"].make_safe()
    assert opened.restarted() == ("pump",)
    opened.prepare()
    assert opened.restarted() == ()
    opened.signal("pump").output(on=True)
    opened.instruments["pump"].make_safe()


def test_a_hot_reading_is_about_ten_messages(rehearsed: Rehearsed) -> None:
    """What the runner does at one frequency: hop both signals blanked, read waves and scalars."""
    from benchrun.contract.capture import Capture

    opened = rehearsed.open()
    opened.prepare()
    faults = rehearsed.rehearsal.faults

    def reading(frequency_hz: float) -> int:
        before = faults.exchanges
        opened.set("probe.frequency", frequency_hz)
        opened.signal("pump").output(on=False)
        opened.set("pump.frequency", frequency_hz - 7e6)
        opened.set("pump.level", -15.0)
        opened.signal("pump").output(on=True)
        offsets = (0.0, -7e6, -14e6)
        waves = ("incident", "reflected")
        opened.receiver.configure(Capture(waves, ("probe", "pump", "image"), offsets, (frequency_hz,), 300.0))
        opened.receiver.acquire()
        for name in ("drain.voltage", "drain.current", "ambient.temperature"):
            opened.read(name)
        return int(faults.exchanges - before)

    reading(2.2e9)
    reading(2.21e9)
    assert reading(2.22e9) <= 11
