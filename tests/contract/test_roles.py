"""What the drivers of each role keep beside what all do."""

from __future__ import annotations

import numpy as np
import pytest

from benchrun.contract.capture import Capture
from benchrun.errors import BenchError, IdentityError, InstrumentError
from tests.contract.opponents import DIALECT, Bout, simulated
from tests.contract.test_any_driver import switch

WAVES = ("incident", "reflected")


def capture(*frequencies_hz: float, tones: int = 1, **given: object) -> Capture:
    names, offsets = ("probe", "pump", "image")[:tones], (0.0, -7e6, -14e6)[:tones]
    return Capture(
        **{
            "waves": WAVES,
            "tones": names,
            "offsets_hz": offsets,
            "frequencies_hz": frequencies_hz,
            "if_bandwidth_hz": 1e3,
            **given,
        }
    )  # type: ignore[arg-type]


def ratio(bout: Bout) -> np.ndarray:
    """Reflected over incident, of the first tone."""
    data = bout.driver.acquire().data[0]
    return data[1] / data[0]


class TestSignalSource:
    ROLE = "signal-source"

    def test_output(self, bout: Bout) -> None:
        bout.driver.prepare()
        for on in (True, False):
            bout.driver.output(on)
            assert bout.session.ask("output") is on

    def test_reference(self, bout: Bout) -> None:
        bout.driver.prepare()
        assert bout.driver.locked()
        bout.simulated.rack.instruments["pump"].reference_present = False
        assert not bout.driver.locked()

    def test_a_rise_goes_by_the_ramp(self, bout: Bout) -> None:
        bout.driver.prepare()
        bout.driver.set("level", -40.0)
        before = len(bout.said)
        bout.driver.set("level", 0.0)
        levels = [float(one.split(" ")[1]) for one in bout.said[before:] if one.startswith("SOUR:POW ")]
        assert levels == [-34.0, -28.0, -22.0, -16.0, -10.0, -4.0, 0.0]

    def test_a_hand_at_the_front_panel_is_noticed(self, bout: Bout) -> None:
        bout.driver.prepare()
        bout.driver.set("frequency", 2.3e9)
        bout.driver.set("level", -30.0)
        bout.driver.output(on=True)
        bout.driver.output(on=False)
        bout.simulated.rack.instruments["pump"].execute("SOUR:POW -20")
        with pytest.raises(InstrumentError, match=r"its level is now -20\.0; it was set to -30\.0"):
            bout.driver.output(on=True)
        assert bout.session.ask("output") is False

    def test_a_list_waits_for_pulses(self, bout: Bout) -> None:
        bout.driver.prepare()
        frequencies = [2.2e9, 2.25e9, 2.3e9]
        bout.driver.load_list(frequencies, [-20.0, -18.0, -19.0])
        source = bout.simulated.rack.instruments["pump"]
        assert source.follow(1) == ((2.2e9,), (-20.0,))
        assert source.follow(3) == ((2.25e9, 2.3e9, 2.2e9), (-18.0, -19.0, -20.0))
        bout.driver.leave_list()
        assert source.follow(1) is None
        assert bout.driver.set("frequency", 2.21e9) == 2.21e9

    @pytest.mark.parametrize(
        ("frequencies", "levels"), [([], []), ([2e9], [-20.0, -20.0]), ([2e9, 2.1e9], [-20.0, 0.0]), ([2e9], [9.0])]
    )
    def test_a_list_that_may_not_be(self, bout: Bout, frequencies: list[float], levels: list[float]) -> None:
        bout.driver.prepare()
        with pytest.raises(InstrumentError):
            bout.driver.load_list(frequencies, levels)
        assert bout.session.ask("frequency-mode") == "CW"


class TestWaveReceiver:
    ROLE = "wave-receiver"

    @pytest.mark.parametrize(
        "wanted",
        [
            capture(2.3e9, tones=3),
            capture(*np.linspace(2.2e9, 2.4e9, 5).tolist()),
            capture(2.2e9, 2.21e9, 2.4e9, tones=2),
            capture(2.3e9, averages=4),
            capture(2.3e9, waves=("reflected",)),
            capture(2.3e9, waves=()),
        ],
        ids=["point", "sweep", "list", "averages", "one wave", "no wave"],
    )
    def test_shape(self, bout: Bout, wanted: Capture) -> None:
        bout.driver.prepare()
        bout.driver.configure(wanted)
        waves = bout.driver.acquire()
        assert waves.data.shape == wanted.shape
        assert waves.data.dtype == np.complex128
        assert np.isfinite(waves.data).all()
        assert len(waves.over_limit) == len(wanted.waves)
        assert waves.coherent is bout.driver.bench.coherent

    def test_the_grid_is_what_was_asked_for(self, bout: Bout) -> None:
        """Point, sweep and list see the same ratio of waves at the same frequencies, but for noise.

        Only ratios: each sweep begins at a phase of its own.
        """
        bout.driver.prepare()
        bout.driver.set("level", 0.0)
        bout.driver.output(on=True)
        grid = np.linspace(2.2e9, 2.4e9, 3).tolist()
        bout.driver.configure(capture(*grid))
        swept = ratio(bout)
        bout.driver.configure(capture(grid[0], grid[1] + 1e3, grid[2]))
        listed = ratio(bout)
        bout.driver.configure(capture(grid[1]))
        point = ratio(bout)
        assert listed == pytest.approx(swept, rel=3e-2)
        assert point[0] == pytest.approx(swept[1], rel=3e-2)
        assert abs(swept[0] - swept[2]) > 0.05 * abs(swept[0])

    def test_the_waves_come_in_the_order_asked_for(self, bout: Bout) -> None:
        bout.driver.prepare()
        bout.driver.set("level", -10.0)
        bout.driver.output(on=True)
        bout.driver.configure(capture(2.3e9))
        forth = np.abs(bout.driver.acquire().data[0, :, 0])
        bout.driver.configure(capture(2.3e9, waves=WAVES[::-1]))
        back = np.abs(bout.driver.acquire().data[0, :, 0])
        assert back == pytest.approx(forth[::-1], rel=3e-2)
        assert max(forth) > 2 * min(forth)

    def test_what_stands_is_not_sent_again(self, bout: Bout) -> None:
        bout.driver.prepare()
        bout.driver.configure(capture(2.3e9))
        before = len(bout.said)
        bout.driver.configure(capture(2.3e9))
        assert len(bout.said) == before
        bout.driver.configure(capture(2.31e9))
        assert bout.said[before:] == ["SENS:FREQ:CW 2310000000 HZ;*OPC?;:SENS:FREQ:CW?;:SYST:ERR?"]

    def test_a_reading_is_few_exchanges(self, bout: Bout) -> None:
        bout.driver.prepare()
        bout.driver.configure(capture(2.3e9, tones=3))
        bout.driver.acquire()
        before = len(bout.said)
        bout.driver.set("frequency", 2.31e9)
        bout.driver.configure(capture(2.31e9, tones=3))
        bout.driver.acquire()
        assert len(bout.said) - before == 3

    def test_after_a_failure_all_of_it_is_sent_again(self, bout: Bout) -> None:
        bout.driver.prepare()
        bout.driver.configure(capture(2.3e9))
        bout.fail(1, "lost-answer")
        with pytest.raises(BenchError):
            bout.driver.acquire()
        with pytest.raises(InstrumentError, match="not configured"):
            bout.driver.acquire()
        before = len(bout.said)
        bout.driver.configure(capture(2.3e9))
        assert "SENS:BAND:RES" in "".join(bout.said[before:])
        bout.driver.acquire()

    @pytest.mark.parametrize("by_hand", ["SOUR:POW -11", "SENS:FREQ:CW 2.2E9", "SENS:BAND 10", "SENS:AVER:COUN 2"])
    def test_a_hand_at_the_front_panel_is_noticed(self, bout: Bout, by_hand: str) -> None:
        bout.driver.prepare()
        bout.driver.set("level", -20.0)
        bout.driver.configure(capture(2.3e9))
        bout.driver.acquire()
        bout.simulated.rack.instruments["analyser"].execute(by_hand)
        with pytest.raises(InstrumentError, match="Somebody changed it at the front panel"):
            bout.driver.acquire()
        bout.driver.configure(capture(2.3e9))
        bout.driver.acquire()

    def test_over_the_limit(self, bout: Bout) -> None:
        bout.driver.prepare()
        bout.driver.set("level", -50.0)
        bout.driver.output(on=True)
        bout.driver.configure(capture(2.3e9))
        assert bout.driver.acquire().over_limit == (False, False)

    def test_a_wave_that_is_not_wired(self, bout: Bout) -> None:
        bout.driver.prepare()
        with pytest.raises(InstrumentError, match="no receiver for transmitted"):
            bout.driver.configure(capture(2.3e9, waves=("transmitted",)))

    def test_the_bench_file_says_otherwise_than_the_instrument(self, bout: Bout) -> None:
        settings = bout.driver.bench
        wrong = type(settings)(settings.name, settings.receivers, {}, settings.source_port, not settings.coherent)
        enter = simulated("analyser", wrong, dialect=DIALECT, coherent=settings.coherent)
        with enter(bout.spec) as other, pytest.raises(IdentityError, match="tones"):
            other.driver.prepare()


class TestDcSupply:
    ROLE = "dc-supply"

    def test_trips_are_read_back(self, bout: Bout) -> None:
        bout.driver.prepare()
        bout.driver.program_trips("drain", current_limit_a=3.0, over_voltage_v=32.0, over_current=True)
        assert bout.session.ask("current-limit", channel=2) == 3.0
        assert bout.session.ask("over-voltage", channel=2) == 32.0
        assert bout.session.ask("over-current", channel=2) is True
        assert bout.session.ask("current-limit", channel=1) != 3.0
        with pytest.raises(InstrumentError):
            bout.driver.program_trips("drain", current_limit_a=3000.0, over_voltage_v=32.0, over_current=True)

    def test_one_output_at_a_time(self, bout: Bout) -> None:
        bout.driver.prepare()
        bout.driver.output("gate", True)
        assert (bout.session.ask("output", channel=1), bout.session.ask("output", channel=2)) == (True, False)
        bout.driver.output("drain", True)
        bout.driver.output("gate", False)
        assert (bout.session.ask("output", channel=1), bout.session.ask("output", channel=2)) == (False, True)

    def test_it_measures_what_it_sets(self, bout: Bout) -> None:
        bout.driver.prepare()
        bout.driver.set("gate.voltage", -4.0)
        bout.driver.output("gate", True)
        assert bout.driver.read("gate.voltage") == pytest.approx(-4.0, abs=0.1)

    def test_a_trip_is_seen(self, bout: Bout) -> None:
        bout.driver.prepare()
        assert not bout.driver.tripped("gate")
        bout.driver.set("gate.voltage", -4.0)
        bout.driver.output("gate", True)
        bout.driver.program_trips("gate", current_limit_a=0.05, over_voltage_v=2.0, over_current=False)
        assert bout.driver.tripped("gate")
        assert not bout.driver.tripped("drain")

    def test_as_a_whole_the_drain_goes_first(self, bout: Bout) -> None:
        bout.driver.prepare()
        switch(bout, on=True)
        before = len(bout.said)
        bout.driver.make_safe()
        offs = [one.split(" ")[0] for one in bout.said[before:] if one.startswith("OUTP")]
        assert offs == ["OUTP2:STAT", "OUTP1:STAT"]

    def test_an_output_that_is_not_there(self, bout: Bout) -> None:
        with pytest.raises(InstrumentError, match="no output 'base'"):
            bout.driver.output("base", True)
