"""Each simulated instrument: its presets, ranges, durations, and what it tells the world."""

from __future__ import annotations

import struct
from typing import Any

import numpy as np
import pytest
from benchrun_sim.instruments import BY_ROLE, WaveReceiver
from benchrun_sim.rack import Rack

from tests.sim.simulated_bench import balloon_wiring

MS = 1_000_000


class Bench:
    """A rack, asked by name; errors are drained and returned on demand."""

    def __init__(self, *, coherent: bool = True) -> None:
        self.rack = Rack(balloon_wiring(coherent=coherent), seed=1)
        self.world: Any = self.rack.world
        for name in self.rack.instruments:
            self(name, "*CLS")

    def __call__(self, name: str, message: str) -> str:
        return self.rack.instruments[name].execute(message).decode("latin-1").removesuffix("\n")

    def error(self, name: str) -> int:
        return int(self(name, "SYST:ERR?").split(",")[0])

    def took_ns(self, name: str, message: str) -> int:
        start = self.world.now_ns
        self(name, message)
        return int(self.world.now_ns) - int(start)


@pytest.fixture
def bench() -> Bench:
    return Bench()


@pytest.fixture
def told(bench: Bench, monkeypatch: pytest.MonkeyPatch) -> dict[str, Any]:
    """What each source was last told, by the instrument's name."""
    heard: dict[str, Any] = {}
    keep = bench.world.set_source

    def listen(name: str, **values: Any) -> None:
        heard[name] = values
        keep(name, **values)

    monkeypatch.setattr(bench.world, "set_source", listen)
    return heard


def floats(answer: str) -> np.ndarray[Any, Any]:
    data = answer.encode("latin-1")
    digits = int(data[1:2])
    payload = data[2 + digits :]
    assert len(payload) == int(data[2 : 2 + digits])
    return np.frombuffer(payload, ">f8")


def test_identities_are_four_fields_and_different() -> None:
    rack = Rack(balloon_wiring(), seed=1)
    answers = {name: i.execute("*IDN?").decode().strip().split(",") for name, i in rack.instruments.items()}
    assert {len(fields) for fields in answers.values()} == {4}
    assert len({fields[0] for fields in answers.values()}) == len(BY_ROLE)


def test_a_role_that_nobody_plays_is_refused() -> None:
    wiring = balloon_wiring()
    wiring["instruments"]["pump"]["role"] = "oscilloscope"
    with pytest.raises(ValueError, match="oscilloscope"):
        Rack(wiring, seed=1)


# ---- durations ------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("name", "message", "milliseconds"),
    [
        ("pump", "OUTP OFF", 1),
        ("pump", "FREQ?;POW?", 1),
        ("pump", "FREQ 2GHZ", 3),
        ("pump", "POW -5", 3),
        ("pump", "FREQ 2GHZ;POW -5", 5),
        ("meter", "READ?", 21),
        ("meter", "AVER:COUN 4;:READ?", 81),
        ("supply", "MEAS:VOLT?", 6),
        ("ambient", "MEAS:TEMP?", 11),
    ],
)
def test_durations(bench: Bench, name: str, message: str, milliseconds: int) -> None:
    assert bench.took_ns(name, message) == milliseconds * MS
    assert bench.error(name) == 0


@pytest.mark.parametrize(("coherent", "tones"), [(True, 1), (False, 3)])
def test_a_sweep_takes_its_points_averages_and_tones(coherent: bool, tones: int) -> None:
    bench = Bench(coherent=coherent)
    bench("analyser", "INIT:CONT OFF;:SWE:POIN 11;:BAND 300;:AVER:COUN 2;:REC:OFFS 0,-7E6,-14E6")
    assert bench.took_ns("analyser", "INIT") == MS
    assert bench.took_ns("analyser", "*OPC?") == 11 * 2 * tones * (4_000_000 + 200_000)
    assert bench.took_ns("analyser", "*OPC?") == MS
    assert bench("analyser", "REC:CAPT?") == ("COH" if coherent else "STEP")


# ---- signal source --------------------------------------------------------------------------------------------------


def test_source_reset_is_off_but_not_low(bench: Bench, told: dict[str, Any]) -> None:
    bench("pump", "FREQ 2.4GHZ;POW -30;:OUTP ON")
    assert told["pump"] == {"frequency_hz": 2.4e9, "level_dbm": -30.0, "on": True}
    bench("pump", "*RST")
    assert told["pump"] == {"frequency_hz": 1e9, "level_dbm": 0.0, "on": False}


def test_source_list_follows_the_receivers_pulses(bench: Bench, monkeypatch: pytest.MonkeyPatch) -> None:
    followed: list[Any] = []
    keep = bench.world.measure_waves

    def listen(*arguments: Any, **named: Any) -> Any:
        followed.append(arguments[8] if len(arguments) > 8 else named.get("follow"))
        return keep(*arguments, **named)

    monkeypatch.setattr(bench.world, "measure_waves", listen)
    bench("pump", "LIST:FREQ 2.1E9,2.2E9,2.3E9;POW -20;:FREQ:MODE LIST;:TRIG:SOUR TTLT1;:OUTP ON")
    bench("analyser", "INIT:CONT OFF;:FREQ:MODE LIST;:LIST:FREQ 2.107E9,2.207E9,2.307E9;:OUTP:TTLT1 ON")
    bench("analyser", "INIT;*WAI")  # nobody is armed
    bench("pump", "INIT")
    assert int(bench("pump", "STAT:OPER:COND?")) == 32
    bench("pump", "INIT")
    assert bench.error("pump") == -213
    bench("analyser", "INIT;*WAI")
    assert followed == [None, {"pump": ((2.1e9, 2.2e9, 2.3e9), (-20.0, -20.0, -20.0))}]
    assert int(bench("pump", "STAT:OPER:COND?")) == 0  # the list has ended
    bench("pump", "INIT:CONT ON;:INIT")
    bench("analyser", "LIST:FREQ 2.1E9,2.2E9;:INIT;*WAI")
    bench("analyser", "INIT;*WAI")
    assert followed[2:] == [{"pump": ((2.1e9, 2.2e9), (-20.0,) * 2)}, {"pump": ((2.3e9, 2.1e9), (-20.0,) * 2)}]
    bench("analyser", "OUTP:TTLT1 OFF;:INIT;*WAI")
    assert followed[4] is None
    assert bench.error("pump") == bench.error("analyser") == 0


def test_source_list_stands_at_its_first_point_until_the_first_pulse(bench: Bench, told: dict[str, Any]) -> None:
    bench("pump", "LIST:FREQ 2.1E9,2.2E9;POW -20,-10;:FREQ:MODE LIST;:TRIG:SOUR TTLT1;:INIT")
    assert told["pump"] == {"frequency_hz": 2.1e9, "level_dbm": -20.0, "on": False}
    bench.rack.pulse(2)
    assert told["pump"] == {"frequency_hz": 2.2e9, "level_dbm": -10.0, "on": False}
    bench("pump", "FREQ:MODE CW")
    assert told["pump"]["frequency_hz"] == 1e9


def test_source_lists_of_different_lengths_conflict(bench: Bench) -> None:
    bench("pump", "LIST:FREQ 1E9,2E9,3E9;POW -1,-2;:FREQ:MODE LIST;:INIT")
    assert bench.error("pump") == -221
    bench("pump", "FREQ:MODE CW;:INIT")
    assert bench.error("pump") == -221


def test_source_list_takes_a_block(bench: Bench) -> None:
    payload = struct.pack(">3d", 1e9, 2e9, 2.5e9).decode("latin-1")
    assert bench("pump", f"LIST:FREQ #224{payload};FREQ?") == "1000000000.0,2000000000.0,2500000000.0"
    bench("pump", f"LIST:FREQ #223{payload[:23]}")
    assert bench.error("pump") == -161


# ---- wave receiver --------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("how", ["*RST", "power"])
def test_receiver_preset_switches_port_power_on(bench: Bench, told: dict[str, Any], how: str) -> None:
    bench("analyser", "OUTP OFF;:SOUR:POW -40")
    assert told["analyser"]["on"] is False
    if how == "*RST":
        bench("analyser", "*RST")
    else:
        bench.rack.power_cycle("analyser")
    assert (told["analyser"]["on"], told["analyser"]["level_dbm"]) == (True, -10.0)
    assert bench("analyser", "OUTP?;:SOUR:POW?;:SOUR:PORT?;:INIT:CONT?") == f"1;-10.0;2;{int(how == 'power')}"


def test_receiver_source_leaves_by_the_wired_port_only(bench: Bench, told: dict[str, Any]) -> None:
    bench("analyser", "SOUR:PORT 1;:OUTP ON")
    assert told["analyser"]["on"] is False
    bench("analyser", "SOUR:PORT 2")
    assert told["analyser"]["on"] is True


def test_receiver_probe_frequency_in_cw(bench: Bench, told: dict[str, Any]) -> None:
    bench("analyser", "FREQ:MODE CW;:SENS:FREQ:CW 2.345GHZ")
    assert told["analyser"]["frequency_hz"] == 2.345e9


def test_receiver_data_layout(bench: Bench, monkeypatch: pytest.MonkeyPatch) -> None:
    """Tone, wave, point, then real and imaginary part; big-endian as FORMat:BORDer NORMal says."""
    waves = (np.arange(12) + 100j + 1j * np.arange(12)).reshape(3, 2, 2)
    monkeypatch.setattr(bench.world, "measure_waves", lambda *_, **__: (waves, np.array([False, True])))
    bench("analyser", "INIT:CONT OFF;:FREQ:MODE LIST;:LIST:FREQ 2.2E9,2.3E9;:REC:LIST R4,R3;OFFS 0,-7E6,-14 MHZ")
    bench("analyser", "FORM REAL,64;:INIT")
    got = floats(bench("analyser", "REC:DATA?"))
    assert got.reshape(3, 2, 2, 2)[..., 0].tolist() == waves.real.tolist()
    assert got.reshape(3, 2, 2, 2)[..., 1].tolist() == waves.imag.tolist()
    assert bench("analyser", "REC:LIM?;:STAT:QUES:COND?") == "0,1;8"
    swapped = bench("analyser", "FORM:BORD SWAP;:REC:DATA?").encode("latin-1")
    assert np.array_equal(np.frombuffer(swapped[5:], "<f8"), got)
    plain = bench("analyser", "FORM ASC;:REC:DATA?")
    assert [float(text) for text in plain.split(",")] == got.tolist()
    short = bench("analyser", "FORM REAL,32;:FORM:BORD NORM;:REC:DATA?").encode("latin-1")
    assert np.array_equal(np.frombuffer(short[4:], ">f4"), got.astype("f4"))
    bench("analyser", "FORM REAL,16")
    assert bench.error("analyser") == -224
    bench("analyser", "BAND 10")  # a new setting ends the warning
    assert bench("analyser", "STAT:QUES:COND?") == "0"


def test_receiver_grid_reaches_the_world(bench: Bench, monkeypatch: pytest.MonkeyPatch) -> None:
    seen: list[Any] = []

    def measure(*arguments: Any) -> Any:
        seen.append(arguments)
        return np.zeros((1, 1, len(arguments[2])), complex), np.zeros(1, bool)

    monkeypatch.setattr(bench.world, "measure_waves", measure)
    bench("analyser", "INIT:CONT OFF;:FREQ:MODE SWE;STAR 2.2GHZ;STOP 2.4GHZ;:SWE:POIN 5;:BAND 100;:AVER:COUN 3")
    start = bench.world.now_ns
    bench("analyser", "INIT")
    name, receivers, grid, offsets, bandwidth, averages, coherent, start_ns, _ = seen[0]
    assert (name, receivers, offsets, bandwidth, averages, coherent) == ("analyser", ["R1"], [0.0], 100.0, 3, True)
    assert np.allclose(grid, [2.2e9, 2.25e9, 2.3e9, 2.35e9, 2.4e9])
    assert start_ns == start + MS


def test_receiver_data_need_a_sweep_and_wait_for_it(bench: Bench) -> None:
    bench("analyser", "INIT:CONT OFF;:SWE:POIN 2;:BAND 10;:FORM REAL,64;:REC:DATA?")
    assert bench.error("analyser") == -230
    bench("analyser", "INIT")
    assert int(bench("analyser", "STAT:OPER:COND?")) == 8
    bench("analyser", "INIT")
    assert bench.error("analyser") == -213
    start = bench.world.now_ns
    assert len(floats(bench("analyser", "REC:DATA?"))) == 4
    assert bench.world.now_ns > start + MS
    assert int(bench("analyser", "STAT:OPER:COND?")) == 0
    bench("analyser", "BAND 1 KHZ;:REC:DATA?")
    assert bench.error("analyser") == -230
    bench("analyser", "INIT;:ABOR;:REC:DATA?")
    assert bench.error("analyser") == -230


def test_receiver_free_running_gives_a_fresh_sweep(bench: Bench) -> None:
    bench("analyser", "INIT:CONT ON;:SWE:POIN 3;:FORM REAL,64;:INIT")
    assert bench.error("analyser") == -213
    assert bench.took_ns("analyser", "REC:DATA?") == MS + 3 * (120_000 + 200_000)


def test_receiver_operation_complete_bit_comes_with_the_end(bench: Bench) -> None:
    bench("analyser", "INIT:CONT OFF;:SWE:POIN 201;:BAND 10;*CLS;:INIT;*OPC")
    assert bench("analyser", "*ESR?") == "0"
    bench.rack.advance(60_000 * MS)
    assert bench("analyser", "*ESR?") == "1"


def test_receiver_refuses_what_it_cannot_tune_to(bench: Bench) -> None:
    bench("analyser", "INIT:CONT OFF;:FREQ:MODE LIST;:LIST:FREQ 12E6;:REC:OFFS 0,-7E6;:INIT")
    assert bench.error("analyser") == -221
    bench("analyser", "REC:LIST R9")
    assert bench.error("analyser") == -224
    bench("analyser", "REC:LIST R3,R3")
    assert bench.error("analyser") == -224
    bench("analyser", "SOUR:POW 10.5")
    assert bench.error("analyser") == -222
    bench("analyser", "BAND 0")
    assert bench.error("analyser") == -222


def test_receivers_are_its_own_and_what_the_wiring_names() -> None:
    wiring = balloon_wiring()
    wiring["receivers"]["reflected"]["receiver"] = "AUX"
    analyser = Rack(wiring, seed=1).instruments["analyser"]
    assert isinstance(analyser, WaveReceiver)
    assert analyser.receivers == ("R1", "R2", "R3", "R4", "AUX")
    assert (
        analyser.execute("INIT:CONT OFF;:REC:LIST R1,AUX;:INIT;*OPC?;:REC:LIM?;:SYST:ERR?") == b'1;0,0;0,"No error"\n'
    )


# ---- power meter, thermometer ---------------------------------------------------------------------------------------


def test_meter_units_and_stale_readings(bench: Bench, monkeypatch: pytest.MonkeyPatch) -> None:
    asked: list[Any] = []
    monkeypatch.setattr(bench.world, "measure_power", lambda *arguments: asked.append(arguments) or 20.0)
    bench("meter", "FETC?")
    assert bench.error("meter") == -230
    assert float(bench("meter", "FREQ 2.3GHZ;:MEAS:POW?")) == 20.0
    assert asked[0][:2] == ("meter", 2.3e9)
    assert float(bench("meter", "UNIT:POW W;:FETC?")) == pytest.approx(0.1)
    bench("meter", "FREQ 2.4GHZ;:FETC?")
    assert bench.error("meter") == -230
    bench("meter", "INIT")
    assert float(bench("meter", "UNIT:POW DBM;:FETC?")) == 20.0


def test_thermometer_units(bench: Bench, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(bench.world, "temperature_degc", lambda *_: 25.0)
    assert float(bench("ambient", "MEAS:TEMP?")) == 25.0
    assert float(bench("ambient", "UNIT:TEMP K;:READ?")) == pytest.approx(298.15)


# ---- supply ---------------------------------------------------------------------------------------------------------


@pytest.fixture
def load(bench: Bench, monkeypatch: pytest.MonkeyPatch) -> dict[int, float]:
    """Resistance at each channel, in ohm: an ideal supply with voltage and current regulation drives it."""
    ohms = {1: 1e6, 2: 1e6}
    state: dict[int, Any] = {1: (0.0, 1.0, False), 2: (0.0, 6.0, False)}

    def put(_: str, channel: int, *, voltage_v: float, current_limit_a: float, on: bool) -> None:
        state[channel] = (voltage_v, current_limit_a, on)

    def read(_: str, channel: int) -> tuple[float, float]:
        volts, limit, on = state[channel]
        amperes = min(max(volts / ohms[channel], -limit), limit) if on else 0.0
        return amperes * ohms[channel], amperes

    monkeypatch.setattr(bench.world, "set_supply", put)
    monkeypatch.setattr(bench.world, "supply_reading", read)
    return ohms


def test_supply_channels(bench: Bench, load: dict[int, float]) -> None:
    load[2] = 28.0
    bench("supply", "SOUR1:VOLT -2.8;CURR 50 MA;:SOUR2:VOLT 28 V;CURR 3;:OUTP1 ON;:OUTP2 ON")
    assert bench("supply", "SOUR1:VOLT?;CURR?;:VOLT?;:SOUR2:VOLT?") == "-2.8;0.05;-2.8;28.0"
    assert float(bench("supply", "MEAS1:VOLT?")) == pytest.approx(-2.8)
    assert float(bench("supply", "MEAS2:CURR?")) == pytest.approx(1.0)
    assert float(bench("supply", "MEAS:VOLT? (@2)")) == pytest.approx(28.0)
    bench("supply", "MEAS:VOLT? (@3)")
    assert bench.error("supply") == -222
    bench("supply", "SOUR3:VOLT 1")
    assert bench.error("supply") == -114
    bench("supply", "SOUR2:VOLT -1")
    assert bench.error("supply") == -222
    assert bench("supply", "SOUR1:VOLT? MIN;:SOUR2:VOLT? MIN") == "-20.0;0.0"


def test_supply_trips_on_over_voltage_and_stays_off(bench: Bench, load: dict[int, float]) -> None:
    bench("supply", "SOUR1:VOLT:PROT 7;:SOUR1:VOLT -6;:OUTP1 ON")
    assert bench("supply", "OUTP1?;:SOUR1:VOLT:PROT:TRIP?") == "1;0"
    bench("supply", "SOUR1:VOLT -8")
    assert bench("supply", "OUTP1?;:SOUR1:VOLT:PROT:TRIP?;:STAT:QUES:COND?") == "0;1;1"
    bench("supply", "OUTP1 ON")
    assert bench.error("supply") == -221
    assert bench("supply", "OUTP1?") == "0"
    bench("supply", "SOUR1:VOLT -5;VOLT:PROT:CLE;:OUTP1 ON")
    assert bench("supply", "OUTP1?;:SOUR1:VOLT:PROT:TRIP?;:STAT:QUES:COND?") == "1;0;0"


def test_supply_trips_on_over_current_only_where_it_is_told_to(bench: Bench, load: dict[int, float]) -> None:
    bench("supply", "SOUR2:VOLT 28;CURR 1;:OUTP2 ON")
    load[2] = 10.0
    assert bench("supply", "MEAS2:CURR?;:OUTP2?;:SOUR2:CURR:PROT:TRIP?") == "1.0;1;0"
    bench("supply", "SOUR2:CURR:PROT:STAT ON")
    assert bench("supply", "OUTP2?;:SOUR2:CURR:PROT:TRIP?;:STAT:QUES:COND?;:SOUR1:CURR:PROT:TRIP?") == "0;1;2;0"
    assert float(bench("supply", "MEAS2:VOLT?")) == 0.0
    bench("supply", "SOUR2:CURR:PROT:CLE")
    assert bench("supply", "OUTP2?;:SOUR2:CURR:PROT:TRIP?") == "0;0"


def test_over_current_trips_on_the_bench_itself(bench: Bench) -> None:
    """Drive makes the device draw more: the drain trips at once, not when the supply is next asked."""
    bench("analyser", "OUTP OFF;:INIT:CONT OFF;:FREQ:MODE CW;:SENS:FREQ:CW 2.3GHZ")
    bench("supply", "SOUR1:VOLT -5;CURR 50 MA;:OUTP1 ON;:SOUR2:VOLT 28;CURR 3;:OUTP2 ON")
    bench.rack.advance(1000 * MS)
    bench("supply", "SOUR1:VOLT -2.8")
    quiescent = float(bench("supply", "MEAS2:CURR?"))
    assert 0.1 < quiescent < 0.7
    bench("supply", f"SOUR2:CURR {quiescent * 1.3};CURR:PROT:STAT ON")
    assert bench("supply", "OUTP2?;:SOUR2:CURR:PROT:TRIP?") == "1;0"
    bench("pump", "FREQ 2.293GHZ;POW -30;:OUTP ON")
    assert bench.rack.instruments["supply"].settings[("output", 2)] is True
    bench("pump", "POW 0")
    assert bench.rack.instruments["supply"].settings[("output", 2)] is False
    assert bench("supply", "OUTP2?;:SOUR2:CURR:PROT:TRIP?;:SYST:ERR?") == '0;1;0,"No error"'
    assert bench.world.damage == []


def test_supply_reset_opens_the_protections(bench: Bench, load: dict[int, float]) -> None:
    bench("supply", "SOUR2:VOLT 28;CURR 1;VOLT:PROT 32;:SOUR2:CURR:PROT:STAT ON;:OUTP2 ON;*RST")
    assert bench("supply", "SOUR2:VOLT?;CURR?;VOLT:PROT?;:SOUR2:CURR:PROT:STAT?;:OUTP2?") == "0.0;6.0;66.0;0;0"
    assert bench.error("supply") == 0
