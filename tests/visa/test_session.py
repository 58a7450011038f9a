"""The session: what is said, what is refused, how failures end, and how the link comes back."""

from __future__ import annotations

import threading
from collections.abc import Iterator
from typing import Any

import numpy as np
import pytest

from benchrun.errors import BenchError, InstrumentError, LinkError, NoAnswerError, ReplyError
from benchrun.visa import scpi
from benchrun.visa.dialect import Dialect, DialectText, compile_dialect
from benchrun.visa.session import Bus, Session
from tests.visa import scripted
from tests.visa.scripted import ScriptedInstrument, ScriptedLibrary, StepClock, address_of

NUMBERS = np.array([1.0, -2.5, 3e-9, 4e17])


def dialect() -> Dialect:
    compiled, wrong = compile_dialect(
        DialectText.model_validate({
            "benchrun": 1,
            "options": True,
            "entries": {
                "frequency": {
                    "set": "SOURce:FREQuency:CW {frequency}",
                    "ask": "SOURce:FREQuency:CW?",
                    "carries": {"frequency": "frequency"},
                    "tolerance": "1 Hz",
                },
                "level": {
                    "set": "SOURce:POWer {level}",
                    "ask": "SOURce:POWer?",
                    "carries": {"level": "level"},
                    "tolerance": "0.01 dB",
                },
                "levels": {
                    "set": "SOURce:LIST:POWer {levels}",
                    "ask": "SOURce:LIST:POWer?",
                    "carries": {"levels": {"kind": "level", "list": True}},
                },
                "output": {"set": "OUTPut:STATe {on}", "ask": "OUTPut:STATe?", "carries": {"on": "switch"}},
                "sweep": {"set": "INITiate:IMMediate", "deadline": "7 s"},
                "data": {"ask": "SENSe:DATA?", "reply": "block"},
                "unheard": {"ask": "SENSe:NOTHing?", "reply": "number"},
            },
        })
    )  # fmt: skip
    assert not wrong
    return compiled


def instrument() -> ScriptedInstrument:
    return ScriptedInstrument(
        settings={
            "SOUR:FREQ:CW": "1000000000",
            "SOUR:POW": "-20",
            "SOUR:LIST:POW": "-20",
            "OUTP:STAT": "0",
            "INIT:IMM": "",
        },
        answers={"*IDN?": b"Nowhere Works,Model 1,007,1.0", "*OPT?": b"0", "SENS:DATA?": scpi.make_floats(NUMBERS)},
        limits={"SOUR:POW": (-60.0, 10.0), "SOUR:FREQ:CW": (1e6, 6e9)},
    )


class Bench:
    """One scripted instrument, called pump, and a session with it."""

    def __init__(self) -> None:
        self.instrument = instrument()
        self.library = ScriptedLibrary.of(pump=self.instrument)
        self.bus = Bus(self.library)
        self.clock = StepClock()
        self.session = self.open()

    def open(self, **limits: Any) -> Session:
        given = {"ceiling_dbm": 5.0, "ramp_db": 6.0, **limits}
        return self.bus.open("pump", address_of("pump"), dialect(), clock=self.clock, **given)

    def heard(self) -> list[str]:
        """What was said since the last call."""
        said = list(self.instrument.heard)
        self.instrument.heard.clear()
        return said

    def fail(self, fault: scripted.Fault, after: int = 0) -> None:
        self.library.faults[self.library.writes + after] = fault


@pytest.fixture
def bench() -> Iterator[Bench]:
    one = Bench()
    yield one
    one.bus.close()


class TestExchanges:
    def test_opening_says_nothing(self, bench: Bench) -> None:
        assert bench.heard() == []

    def test_confirm_is_one_message(self, bench: Bench) -> None:
        assert bench.session.confirm("frequency", frequency=2.2e9) == 2.2e9
        assert bench.heard() == ["SOUR:FREQ:CW 2200000000 HZ;*OPC?;:SOUR:FREQ:CW?;:SYST:ERR?"]

    def test_several_confirmed_in_one_message(self, bench: Bench) -> None:
        assert bench.session.confirm_all([("frequency", {"frequency": 1e9}), ("output", {"on": True})]) == (1e9, True)
        assert bench.heard() == ["SOUR:FREQ:CW 1000000000 HZ;:OUTP:STAT 1;*OPC?;:SOUR:FREQ:CW?;:OUTP:STAT?;:SYST:ERR?"]

    def test_nothing_to_confirm_is_no_message(self, bench: Bench) -> None:
        assert bench.session.confirm_all([]) == ()
        assert bench.heard() == []

    def test_ask_sees_the_queue_empty_and_query_does_not(self, bench: Bench) -> None:
        assert bench.session.ask("output") is False
        assert bench.session.query("output") is False
        assert bench.heard() == ["OUTP:STAT?;:SYST:ERR?", "OUTP:STAT?"]

    def test_send_waits_for_completion(self, bench: Bench) -> None:
        bench.session.send("sweep")
        assert bench.heard() == ["INIT:IMM;*OPC?;:SYST:ERR?"]

    def test_settings_and_queries_together(self, bench: Bench) -> None:
        assert bench.session.exchange([("sweep", {})], [("output", {}), ("frequency", {})]) == (False, 1e9)

    def test_identify(self, bench: Bench) -> None:
        bench.instrument.errors.append('-100,"left by somebody"')
        identity = bench.session.identify()
        assert (identity.maker, identity.model, identity.serial, identity.firmware, identity.options) == (
            "Nowhere Works", "Model 1", "007", "1.0", "0",
        )  # fmt: skip
        assert bench.instrument.errors == []
        bench.session.confirm("output", on=False)

    def test_a_badly_formed_identity(self, bench: Bench) -> None:
        bench.instrument.answers["*IDN?"] = b"who knows"
        with pytest.raises(ReplyError, match=r"maker,model,serial,firmware"):
            bench.session.identify()

    def test_the_last_exchanges_are_kept(self, bench: Bench) -> None:
        for _ in range(100):
            bench.clock.sleep(1e-3)
            bench.session.ask("output")
        assert len(bench.session.exchanges) == 64
        last = bench.session.exchanges[-1]
        assert last == (100_000_000, "OUTP:STAT?;:SYST:ERR?", '0;0,"No error"', "")

    def test_an_entry_that_is_not_there(self, bench: Bench) -> None:
        assert not bench.session.has("phase")
        with pytest.raises(InstrumentError, match=r"no entry 'phase'"):
            bench.session.ask("phase")

    def test_a_value_that_is_none(self, bench: Bench) -> None:
        for values in ({}, {"frequency": "1 GHz"}, {"frequency": float("nan")}, {"frequency": True is None}):
            if values == {"frequency": False}:
                continue
            with pytest.raises(InstrumentError, match=r"pump \(TCPIP0::pump::inst0::INSTR\).*Nothing was sent"):
                bench.session.confirm("frequency", **values)
        assert bench.heard() == []


class TestLevels:
    def test_above_the_ceiling_nothing_is_sent(self, bench: Bench) -> None:
        for attempt in (bench.session.confirm, bench.session.send):
            with pytest.raises(InstrumentError, match=r"5\.01 dBm is above its ceiling.*Nothing was sent"):
                attempt("level", level=5.01)
        assert bench.heard() == []

    @pytest.mark.parametrize("level", [float("nan"), float("inf"), "5", "5 DBM;OUTP 1"])
    def test_no_level(self, bench: Bench, level: Any) -> None:
        with pytest.raises(InstrumentError, match=r"Nothing was sent"):
            bench.session.confirm("level", level=level)
        assert bench.heard() == []

    def test_no_ceiling_no_level(self, bench: Bench) -> None:
        session = bench.open(ceiling_dbm=None)
        with pytest.raises(InstrumentError, match=r"no ceiling"):
            session.confirm("level", level=-100.0)

    def test_a_bad_level_among_others_stops_all(self, bench: Bench) -> None:
        with pytest.raises(InstrumentError, match=r"ceiling"):
            bench.session.confirm_all([("output", {"on": True}), ("level", {"level": 6.0})])
        assert bench.heard() == []

    def test_a_rise_goes_by_the_ramp_from_what_stands(self, bench: Bench) -> None:
        assert bench.session.confirm("level", level=-5.0) == -5.0
        said = bench.heard()
        assert said[0] == "SOUR:POW?;:SYST:ERR?"
        assert [message.split(";")[0] for message in said[1:]] == [
            "SOUR:POW -14 DBM",
            "SOUR:POW -8 DBM",
            "SOUR:POW -5 DBM",
        ]

    def test_a_fall_is_one_step(self, bench: Bench) -> None:
        bench.session.confirm("level", level=-20.0)
        bench.heard()
        bench.session.confirm("level", level=-60.0)
        assert len(bench.heard()) == 1

    def test_send_of_a_level_rises_too(self, bench: Bench) -> None:
        bench.session.send("level", level=-10.0)
        assert [message.split(";")[0] for message in bench.heard()] == [
            "SOUR:POW?",
            "SOUR:POW -14 DBM",
            "SOUR:POW -10 DBM",
        ]

    def test_exchange_takes_no_level(self, bench: Bench) -> None:
        with pytest.raises(InstrumentError, match=r"confirmed, not only sent"):
            bench.session.exchange([("level", {"level": -20.0})])
        assert bench.heard() == []

    def test_the_ramp_starts_anew_after_reopening(self, bench: Bench) -> None:
        """Somebody turned the level down by hand while the link was away."""
        bench.session.confirm("level", level=-20.0)
        bench.session.reopen()
        bench.instrument.settings["SOUR:POW"] = "-40"
        bench.heard()
        bench.session.confirm("level", level=-20.0)
        assert [message.split(";")[0] for message in bench.heard()] == [
            "SOUR:POW?", "SOUR:POW -34 DBM", "SOUR:POW -28 DBM", "SOUR:POW -22 DBM", "SOUR:POW -20 DBM",
        ]  # fmt: skip

    def test_a_list_may_not_jump(self, bench: Bench) -> None:
        with pytest.raises(InstrumentError, match=r"rises from -20 dBm to -10 dBm"):
            bench.session.confirm("levels", levels=[-20.0, -10.0])
        with pytest.raises(InstrumentError, match=r"rises"):
            bench.session.confirm("levels", levels=[-10.0, -15.0, -20.0])
        with pytest.raises(InstrumentError, match=r"ceiling"):
            bench.session.confirm("levels", levels=[4.0, 6.0])
        assert bench.heard() == []
        assert bench.session.confirm("levels", levels=[-20.0, -15.0]) == (-20.0, -15.0)


class TestComplaints:
    def test_a_setting_that_was_not_taken(self, bench: Bench) -> None:
        bench.instrument.limits["SOUR:FREQ:CW"] = (1e6, 2e9)
        with pytest.raises(
            InstrumentError, match=r"did not take 'SOUR:FREQ:CW 2200000000 HZ': it now says 2e\+09|2000000000"
        ):
            bench.session.confirm("frequency", frequency=2.2e9)
        assert not bench.session.suspect

    def test_the_whole_queue_is_named_with_its_exchange(self, bench: Bench) -> None:
        bench.instrument.errors += ['-222,"Data out of range;SOUR:FREQ"', '-310,"System error"']
        with pytest.raises(InstrumentError) as caught:
            bench.session.confirm("frequency", frequency=2.2e9)
        text = str(caught.value)
        assert '-222,"Data out of range;SOUR:FREQ"; -310,"System error"' in text
        assert "SOUR:FREQ:CW 2200000000 HZ" in text
        assert "pump (TCPIP0::pump::inst0::INSTR)" in text
        assert bench.instrument.errors == []
        bench.session.confirm("frequency", frequency=2.2e9)

    def test_a_header_that_is_not_understood_is_explained(self, bench: Bench) -> None:
        with pytest.raises(InstrumentError, match=r"-113.*SENS:NOTH"):
            bench.session.ask("unheard")
        assert bench.session.ask("output") is False

    def test_a_message_that_ended_half_way_is_explained(self, bench: Bench) -> None:
        """A command error in the middle: what was asked before it is answered, what comes after it is not."""
        with pytest.raises(InstrumentError, match=r"-113.*SENS:NOTH.*after 'INIT:IMM;\*OPC\?;:SENS:NOTH\?"):
            bench.session.exchange([("sweep", {})], [("unheard", {})])
        assert bench.session.ask("output") is False

    def test_an_error_in_place_of_a_block(self, bench: Bench) -> None:
        del bench.instrument.answers["SENS:DATA?"]
        bench.instrument.answers["SENS:DATA?"] = b""
        bench.instrument.errors.append('-230,"Data corrupt or stale"')
        bench.instrument.receive = _only_error(bench.instrument)  # type: ignore[method-assign]
        with pytest.raises(InstrumentError, match=r"-230"):
            bench.session.block("data", 4)

    def test_a_queue_that_is_never_empty(self, bench: Bench) -> None:
        bench.instrument.answers["SYST:ERR?"] = b'-350,"Queue overflow"'
        bench.instrument.receive = lambda message: b'-350,"Queue overflow"\n'  # type: ignore[method-assign]
        with pytest.raises(InstrumentError, match=r"-350"):
            bench.session.send("sweep")
        with pytest.raises(LinkError, match=r"never empty"):
            bench.session.reopen()


def _only_error(one: ScriptedInstrument) -> Any:
    def receive(message: str) -> bytes:
        return ((one.errors.pop(0) if one.errors else '0,"No error"') + "\n").encode()

    return receive


class TestBlocks:
    def test_numbers(self, bench: Bench) -> None:
        values = bench.session.block("data", 4)
        assert list(values) == list(NUMBERS)
        assert values.dtype == np.float64
        assert bench.heard() == ["SENS:DATA?;:SYST:ERR?"]
        assert bench.session.ask("output") is False

    def test_line_feeds_among_the_data_end_nothing(self, bench: Bench) -> None:
        numbers = np.frombuffer(b"\n" * 32, dtype=">f8").astype(float)
        bench.instrument.answers["SENS:DATA?"] = scpi.make_floats(numbers)
        assert list(bench.session.block("data", 4)) == list(numbers)

    def test_a_long_header_and_one_of_unstated_length(self, bench: Bench) -> None:
        payload = scpi.parse_block(scpi.make_floats(NUMBERS))
        for head in (b"#9000000032", b"#0"):
            bench.instrument.answers["SENS:DATA?"] = head + payload
            assert list(bench.session.block("data", 4)) == list(NUMBERS)

    @pytest.mark.parametrize(
        ("block", "reason"),
        [
            (b"#232" + b"x" * 20, "says 32 bytes, and its end is not there"),
            (b"#232" + b"x" * 18, "says 32 bytes, and fewer arrived"),
            (b"#232" + b"x" * 8, "says 32 bytes, 22 arrived"),
            (b"#232" + b"x" * 40, "says 32 bytes, and its end is not there"),
            (scpi.make_floats(NUMBERS[:3]), "says 24 bytes, 32 were expected"),
            (scpi.make_floats(np.array([1.0, np.nan, 0.0, 0.0])), "number 2 of 4 is nan"),
            (scpi.make_floats(np.array([9.91e37, 1.0, 0.0, 0.0])), "number 1 of 4"),
            (b"#x32", "begins with # and a digit"),
            (b"1.0,2.0", "a block was expected|not an entry"),
        ],
    )  # fmt: skip
    def test_not_the_block_that_was_expected(self, bench: Bench, block: bytes, reason: str) -> None:
        bench.instrument.answers["SENS:DATA?"] = block
        with pytest.raises(ReplyError, match=reason) as caught:
            bench.session.block("data", 4)
        assert "pump (TCPIP0::pump::inst0::INSTR)" in str(caught.value)
        assert "SENS:DATA?" in str(caught.value)
        bench.instrument.answers["SENS:DATA?"] = scpi.make_floats(NUMBERS)
        assert list(bench.session.block("data", 4)) == list(NUMBERS)


class TestFailures:
    def test_no_answer(self, bench: Bench) -> None:
        bench.fail(scripted.silence)
        bench.fail(scripted.silence, after=1)
        with pytest.raises(NoAnswerError) as caught:
            bench.session.send("sweep")
        assert "pump (TCPIP0::pump::inst0::INSTR): did not answer 'INIT:IMM;*OPC?;:SYST:ERR?' within 7 s" in str(
            caught.value
        )
        assert bench.session.suspect
        assert bench.session.exchanges[-1].error

    def test_own_deadline(self, bench: Bench) -> None:
        bench.fail(scripted.silence)
        with pytest.raises(NoAnswerError, match=r"within 0\.25 s"):
            bench.session.ask("output", deadline_s=0.25)

    def test_after_a_failure_the_link_is_opened_anew_and_cleared(self, bench: Bench) -> None:
        bench.fail(scripted.silence)
        bench.fail(scripted.silence, after=1)
        with pytest.raises(NoAnswerError):
            bench.session.ask("output")
        bench.library.story.clear()
        bench.instrument.errors.append('-410,"Query INTERRUPTED"')
        bench.heard()
        assert bench.session.ask("output") is False
        assert bench.library.story == [f"close {address_of('pump')}", f"open {address_of('pump')}", "clear"]
        assert bench.heard() == ["SYST:ERR?", "SYST:ERR?", "*ESR?", "OUTP:STAT?;:SYST:ERR?"]
        assert not bench.session.suspect

    def test_a_late_answer_is_not_taken_for_another(self, bench: Bench) -> None:
        """The answer to the exchange that failed arrives after all, in the middle of the next."""
        bench.fail(scripted.silence)
        bench.fail(scripted.silence, after=1)
        with pytest.raises(NoAnswerError):
            bench.session.ask("frequency")
        late = lambda line, data: b'123;0,"No error"\n' + line.instrument.receive(data[:-1].decode())  # noqa: E731
        bench.fail(late)
        assert bench.session.ask("output") is False

    def test_an_instrument_that_always_answers_out_of_turn(self, bench: Bench) -> None:
        receive = bench.instrument.receive
        bench.instrument.receive = lambda message: b"7;" + receive(message)  # type: ignore[method-assign]
        with pytest.raises(ReplyError, match=r"1 replies were expected, 2 came"):
            bench.session.ask("output")
        with pytest.raises(ReplyError, match=r"answers out of turn"):
            bench.session.ask("output")

    @pytest.mark.parametrize("fault", [scripted.reset, scripted.lost])
    def test_a_broken_link(self, bench: Bench, fault: scripted.Fault) -> None:
        bench.fail(fault)
        with pytest.raises(LinkError, match=r"the link broke at 'OUTP:STAT\?") as caught:
            bench.session.ask("output")
        assert not isinstance(caught.value, NoAnswerError)
        assert caught.value.__cause__ is not None

    def test_garbage(self, bench: Bench) -> None:
        bench.fail(scripted.garbage)
        with pytest.raises(ReplyError, match=r"garbled"):
            bench.session.ask("output")
        assert bench.session.suspect

    def test_the_wrong_number_of_replies(self, bench: Bench) -> None:
        bench.fail(lambda line, data: b'1;2;3;0,"No error"\n')
        with pytest.raises(ReplyError, match=r"1 replies were expected, 3 came"):
            bench.session.ask("output")

    def test_a_reply_of_another_kind(self, bench: Bench) -> None:
        bench.instrument.settings["OUTP:STAT"] = "MAYBE"
        with pytest.raises(ReplyError, match=r"'MAYBE' is not a boolean"):
            bench.session.ask("output")

    def test_a_number_that_means_no_number(self, bench: Bench) -> None:
        bench.instrument.settings["SOUR:POW"] = "9.91E37"
        with pytest.raises(ReplyError, match=r"no valid number"):
            bench.session.ask("level")

    def test_control_c_leaves_the_link_suspect(self, bench: Bench) -> None:
        bench.fail(scripted.interrupt)
        with pytest.raises(KeyboardInterrupt):
            bench.session.ask("output")
        assert bench.session.suspect
        assert bench.session.confirm("output", on=False) is False

    def test_an_instrument_that_is_gone_for_good(self, bench: Bench) -> None:
        bench.fail(scripted.reset)
        with pytest.raises(LinkError):
            bench.session.ask("output")
        bench.library.instruments.clear()
        for _ in range(2):
            with pytest.raises(LinkError, match=r"cannot be opened"):
                bench.session.ask("output")

    def test_a_restarted_instrument_is_read_and_switched_off_and_nothing_else(self, bench: Bench) -> None:
        bench.instrument.events = 128
        bench.session.identify()
        bench.session.confirm("output", on=True)
        bench.fail(scripted.reset)
        with pytest.raises(LinkError):
            bench.session.ask("output")
        bench.instrument.events = 128
        for attempt in (
            lambda: bench.session.confirm("output", on=True),
            lambda: bench.session.send("sweep"),
            lambda: bench.session.confirm("level", level=-60.0),
            lambda: bench.session.block("data", 4),
        ):
            with pytest.raises(InstrumentError, match=r"its settings are gone"):
                attempt()
        assert bench.session.confirm("output", on=False) is False
        assert bench.session.ask("level") == -20.0
        bench.session.accept_restart()
        bench.session.send("sweep")

    @pytest.mark.parametrize("fault", scripted.FAULTS.values(), ids=scripted.FAULTS)
    def test_every_exchange_may_fail(self, bench: Bench, fault: scripted.Fault) -> None:
        """Exchange n fails, for every n: one of our errors each time, and the next round finds all in order."""
        length = self._rounds(bench, None)
        for n in range(length):
            bench.instrument.settings["SOUR:POW"] = "-20"
            bench.session.reopen()
            with pytest.raises(BenchError):
                self._rounds(bench, (n, fault))
            bench.library.faults.clear()
            assert bench.session.confirm("output", on=False) is False
            assert float(bench.instrument.settings["SOUR:POW"]) <= 5.0

    @staticmethod
    def _rounds(bench: Bench, fault: tuple[int, scripted.Fault] | None) -> int:
        begin = bench.library.writes
        if fault:
            bench.library.faults[begin + fault[0]] = fault[1]
        bench.session.identify()
        bench.session.confirm("level", level=-5.0)
        bench.session.confirm("output", on=True)
        bench.session.send("sweep")
        bench.session.block("data", 4)
        return bench.library.writes - begin


class TestBus:
    def test_nothing_at_the_address(self, bench: Bench) -> None:
        with pytest.raises(
            LinkError, match=r"meter \(TCPIP0::nowhere::inst0::INSTR\): cannot be opened.*Check that it is on"
        ):
            bench.bus.open("meter", address_of("nowhere"), dialect(), clock=bench.clock)

    def test_a_kind_of_link_that_this_computer_lacks_a_package_for(
        self, bench: Bench, monkeypatch: pytest.MonkeyPatch
    ) -> None:
        """Then the cable is not to blame."""

        def lacking(*_: Any, **__: Any) -> None:
            raise ValueError("Please install PyUSB to use this resource type.\nNo module named 'usb'")

        monkeypatch.setattr(bench.bus._manager, "open_resource", lacking)
        with pytest.raises(LinkError, match=r"cannot open such an address yet \(Please install PyUSB.*another backend"):
            bench.bus.open("meter", "USB0::1::2::3::INSTR", dialect(), clock=bench.clock)

    def test_an_address_that_is_none(self, bench: Bench) -> None:
        with Bus("py") as bus, pytest.raises(LinkError, match=r"is not a VISA address"):
            bus.open("meter", "192.0.2.23", dialect(), clock=bench.clock)

    def test_a_backend_that_is_none(self) -> None:
        with pytest.raises(LinkError, match=r"VISA backend 'carrier-pigeon' cannot be used"):
            Bus("carrier-pigeon")

    def test_sessions_close_before_the_manager(self, bench: Bench) -> None:
        bench.open()
        bench.library.story.clear()
        bench.bus.close()
        bench.bus.close()
        assert bench.library.story == [f"close {address_of('pump')}"] * 2 + ["close manager 1"]

    def test_a_second_bus_outlives_the_first(self, bench: Bench) -> None:
        other = Bus(bench.library)
        session = other.open("pump", address_of("pump"), dialect(), clock=bench.clock)
        bench.bus.close()
        assert session.ask("output") is False
        other.close()
        assert bench.library.story[-1] == "close manager 1"

    def test_a_closed_session_is_opened_by_nobody(self, bench: Bench) -> None:
        bench.session.close()
        with pytest.raises(LinkError, match=r"closed"):
            bench.session.ask("output")

    def test_one_exchange_at_a_time(self, bench: Bench) -> None:
        """Four threads talk to one instrument: each gets its own answers."""
        failures: list[BaseException] = []

        def talk(frequency: float) -> None:
            try:
                for _ in range(50):
                    assert bench.session.confirm("frequency", frequency=frequency) == frequency
            except BaseException as error:
                failures.append(error)

        threads = [threading.Thread(target=talk, args=(1e9 + n,)) for n in range(4)]
        for thread in threads:
            thread.start()
        for thread in threads:
            thread.join()
        assert failures == []
