"""The runner on a bench of plain objects: order, RF, flags, prompts, procedures, stops."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from pydantic import BaseModel

from benchrun.acquire import (
    Outcome,
    Prompt,
    RefusingPrompter,
    RehearsalPrompter,
    Silent,
    StopRequest,
    acquire,
    outcome_of,
)
from benchrun.acquire.machine import Event, Machine
from benchrun.acquire.performer import LEAD_NS
from benchrun.contract.actions import Action, AskAction, ProcedureAction, ReadAction, SetAction, SettleAction
from benchrun.contract.capture import WaveData
from benchrun.contract.hooks import StepSpec
from benchrun.errors import (
    BenchError,
    DiskError,
    InputError,
    InstrumentError,
    NoAnswerError,
    ReplyError,
    StoppedError,
    UnsafeError,
)
from tests.acquire.fake_bench import (
    BENCH,
    FakeBench,
    FakeClock,
    FakeSchedule,
    MemoryWriter,
    capture,
    dies,
    no_answer,
)

BOTH = ("probe", "pump")


def bring_up(_parameters: Any, access: Any) -> dict[str, float]:
    supply = access.supply("gate")
    access.set("gate.voltage", -5.0)
    supply.output("gate", True)
    access.set("drain.voltage", 28.0)
    access.supply("drain").output("drain", True)
    access.say("gate -5 V, drain 28 V")
    return {"drain_v": access.read("drain.voltage")}


STEPS = {"bring-up": StepSpec("bring-up", BaseModel, "", lambda _model, _scope: iter(()), bring_up)}
UP = ProcedureAction("bring-up", {"drain_v": 28.0})


def at(hz: float, *, level_dbm: float | None = None) -> SetAction:
    """Return the setting of one point of a sweep, levels written first to see that frequencies are set first."""
    levels = (("pump.level", level_dbm),) if level_dbm is not None else ()
    return SetAction((*levels, ("probe.frequency", hz), ("pump.frequency", hz - 7e6)))


def point(hz: float, name: str = "hot", scalars: tuple[str, ...] = (), **more: Any) -> list[Action]:
    read = ReadAction(name, capture(hz), BOTH, scalars)
    return [at(hz, **more), SettleAction(0.02, BOTH), read]


class Recorder(Silent):
    """Progress that remembers."""

    def __init__(self) -> None:
        self.phases: list[tuple[str, str]] = []
        self.indices: list[int] = []
        self.lefts: list[tuple[float, float]] = []
        self.paused = 0
        self.messages: list[str] = []

    def message(self, text: str) -> None:
        self.messages.append(text)

    def phase(self, name: str, text: str) -> None:
        self.phases.append((name, text))

    def reading(
        self, index: int, total: int, conditions: Any, elapsed_s: float, left_s: float, bench_left_s: float, flags: Any
    ) -> None:
        self.indices.append(index)
        self.lefts.append((left_s, bench_left_s))

    def pause(self) -> None:
        self.paused += 1


class Stage:
    """Everything that a run needs, and the run."""

    def __init__(self, actions: list[Action], **more: Any) -> None:
        self.bench = FakeBench(more.pop("clock", None))
        self.schedule = FakeSchedule(actions, **more)
        self.writer = MemoryWriter()
        self.progress = Recorder()
        self.prompter: Any = RefusingPrompter()
        self.stop = StopRequest()

    def run(self, start: int = 0) -> Outcome:
        return acquire(
            self.schedule, self.bench, BENCH, STEPS, self.writer, self.bench.clock, self.prompter, self.progress,  # type: ignore[arg-type]
            start=start, stop=self.stop,
        )  # fmt: skip

    def fails(self, kind: type[BaseException]) -> tuple[BaseException, Outcome]:
        with pytest.raises(kind) as caught:
            self.run()
        assert type(caught.value) is kind
        outcome = outcome_of(caught.value)
        assert outcome is not None
        assert self.bench.dark or not outcome.safe.safe
        assert not self.bench.harm
        return caught.value, outcome

    def after(self, text: str) -> list[str]:
        """Return the story behind the first line that is `text`."""
        return self.bench.story[self.bench.story.index(text) + 1 :]


def asks(answers: dict[str, str] | None = None, then: Any = None) -> Any:
    """Return a prompter that looks whether it is dark, answers by text and remembers what it was asked."""

    class Asked:
        available = True

        def __init__(self) -> None:
            self.prompts: list[Prompt] = []

        def ask(self, prompt: Prompt) -> str:
            self.prompts.append(prompt)
            if then is not None:
                then()
            return (answers or {}).get(prompt.text, "proceed")

    return Asked()


def test_every_reading_is_committed_with_exactly_its_signals_on() -> None:
    alone = ReadAction("alone", capture(2.4e9, tones=("probe",)), ("probe",))
    stage = Stage([*point(2.2e9), *point(2.3e9), at(2.4e9), alone])
    outcome = stage.run()
    assert (outcome.state, outcome.readings, outcome.planned, outcome.flagged, outcome.cause) == (
        "complete",
        3,
        3,
        0,
        "",
    )
    assert [(r.index, r.name, r.attempt) for r in stage.writer.committed] == [
        (0, "hot", 0),
        (1, "hot", 0),
        (2, "alone", 0),
    ]
    assert stage.bench.swept[:3] == [frozenset(BOTH), frozenset(BOTH), frozenset({"probe"})]
    assert stage.bench.dark
    assert not stage.bench.harm


def test_what_is_committed_is_what_was_read() -> None:
    stage = Stage(
        point(2.3e9, scalars=("drain.current", "ambient.temperature", "meter.power")),
        conditions={0: {"frequency_hz": 2.3e9}},
    )
    stage.bench.scalars["meter.power"] = 27.5
    stage.run()
    (reading,) = stage.writer.committed
    assert reading.conditions == {"frequency_hz": 2.3e9}
    assert reading.scalars == {"drain.current_a": 0.0, "ambient.temperature_degc": 23.0, "meter.power_dbm": 27.5}
    assert reading.data.shape == (2, 2, 1)
    assert reading.data[1, 0, 0] == 0.1 + 0.01j
    assert (reading.tones, reading.waves, reading.offsets_hz) == (BOTH, ("incident", "reflected"), (0.0, -7e6))
    assert reading.frequencies_hz == (2.3e9,)
    assert reading.coherent
    assert reading.flags == ()
    assert reading.started_ns < reading.ended_ns
    assert reading.started_utc.endswith("+00:00")


def test_scalars_alone_are_a_reading_too() -> None:
    stage = Stage(
        [
            ReadAction("levelling", None, ("pump",), ("meter.power",)),
            ReadAction("ambient", None, (), ("ambient.temperature",)),
        ]
    )
    stage.run()
    first, second = stage.writer.committed
    assert first.data.shape == second.data.shape == (0, 0, 0)
    assert first.scalars == {"meter.power_dbm": 23.0}
    order = [
        line
        for line in stage.bench.story
        if line in ("pump rf on", "meter power?", "pump rf off", "ambient temperature?")
    ]
    rf_on = order.index("pump rf on")
    assert order[rf_on : rf_on + 4] == ["pump rf on", "meter power?", "pump rf off", "ambient temperature?"]


def test_a_hop_is_blanked_and_frequencies_come_before_levels() -> None:
    stage = Stage([*point(2.2e9, level_dbm=-3.0), *point(2.3e9, level_dbm=-2.0)])
    stage.run()
    assert not stage.bench.harm
    second = stage.after("analyser sweep")
    assert second[: second.index("pump rf on")] == [
        "analyser rf off", "pump rf off",
        "analyser frequency 2.3e+09", "pump frequency 2.293e+09", "pump level -2",
        "analyser rf on",
    ]  # fmt: skip


def test_a_level_is_changed_without_switching_rf() -> None:
    louder = [SetAction((("pump.level", -2.0),)), SettleAction(0.02, BOTH), ReadAction("hot", capture(2.2e9), BOTH)]
    stage = Stage([*point(2.2e9, level_dbm=-3.0), *louder])
    stage.run()
    second = stage.after("analyser sweep")
    assert not [line for line in second[: second.index("analyser sweep")] if "rf" in line or "frequency" in line]


def test_the_receiver_is_set_up_before_rf_settles() -> None:
    sweep = ReadAction("cold", capture((2.2e9, 2.3e9, 2.4e9), tones=("probe",)), ("probe",))
    stage = Stage([SetAction((("probe.level", -10.0),)), SettleAction(0.02, ("probe",)), sweep])
    stage.run()
    assert not stage.bench.harm
    story = stage.after("ambient prepare")
    assert story.index("analyser configure 3 points from 2.2e+09") < story.index("analyser rf on")


def test_a_grid_that_moves_with_rf_on_is_blanked() -> None:
    sweep = ReadAction("cold", capture((2.2e9, 2.4e9), tones=("probe",)), ("probe",))
    stage = Stage([*point(2.3e9), sweep, ReadAction("hot", capture(2.3e9), BOTH), sweep])
    stage.run()
    assert not stage.bench.harm
    assert stage.writer.readings == 4


def follow(*levels_dbm: float) -> ReadAction:
    return ReadAction("hot", capture((2.2e9, 2.3e9), follow=True, levels_dbm=levels_dbm), BOTH)


def test_a_source_follows_the_receivers_sweep_by_its_list() -> None:
    stage = Stage([SetAction((("pump.level", -4.0),)), SettleAction(0.02, BOTH), follow(-4.0, -4.2), *point(2.3e9)])
    stage.run()
    assert not stage.bench.harm
    assert "pump list of 2 from 2.193e+09 at -4" in stage.bench.story
    after = stage.after("analyser sweep")
    assert after.index("pump leave list") < after.index("analyser configure 1 points from 2.3e+09")


def test_a_list_is_loaded_again_where_only_its_levels_differ() -> None:
    stage = Stage([SetAction((("pump.level", -4.0),)), follow(-4.0, -4.2), follow(3.0, 2.8)])
    stage.run()
    assert not stage.bench.harm
    assert [line for line in stage.bench.story if "list of" in line] == [
        "pump list of 2 from 2.193e+09 at -4", "pump list of 2 from 2.193e+09 at 3",
    ]  # fmt: skip


def test_readings_start_at_their_time_where_time_is_virtual() -> None:
    stage = Stage([*point(2.2e9), *point(2.3e9), *point(2.4e9)], slot_s=2.0)
    stage.run()
    assert [r.started_ns for r in stage.writer.committed] == [LEAD_NS + k * 2_000_000_000 for k in (1, 2, 3)]


def test_real_time_is_not_moved() -> None:
    stage = Stage([*point(2.2e9), *point(2.3e9)], slot_s=100.0, clock=FakeClock(virtual=False))
    stage.run()
    assert stage.bench.clock.ns < 2_000_000_000


def test_a_run_may_begin_in_the_middle() -> None:
    stage = Stage([*point(2.2e9), *point(2.3e9), *point(2.4e9)])
    outcome = stage.run(start=2)
    assert [r.index for r in stage.writer.committed] == [2]
    assert outcome.readings == 1


# Flags and refusals


def test_what_is_not_as_it_should_be_is_flagged() -> None:
    stage = Stage([*point(2.2e9, scalars=("meter.power", "drain.current")), *point(2.3e9)])
    stage.bench.unlocked = {"pump"}
    stage.bench.overdriven = {"reflected"}
    stage.bench.scalars["meter.power"] = 33.5  # the sensor is linear up to 33 dBm
    outcome = stage.run()
    first, second = stage.writer.committed
    assert first.flags == ("reference-unlocked:pump", "over-limit:reflected", "over-limit:meter.power")
    assert second.flags == ("reference-unlocked:pump", "over-limit:reflected")
    assert outcome.flagged == 2


def test_infinity_is_over_range_and_flagged_not_lost() -> None:
    stage = Stage(point(2.2e9, scalars=("meter.power",)))
    stage.bench.scalars["meter.power"] = float("inf")
    stage.run()
    assert stage.writer.committed[0].flags == ("over-limit:meter.power",)
    assert stage.writer.committed[0].scalars["meter.power_dbm"] == float("inf")


def not_a_number(found: WaveData) -> WaveData:
    data = found.data.copy()
    data[1, 1, 0] = complex(np.nan, 0.0)
    return replace(found, data=data)


MANGLED = {
    "not a number": (not_a_number, "receiver reflected: what it gave for the pump at 2.3 GHz is not a number"),
    "infinite": (lambda found: replace(found, data=found.data * np.inf), "not a number"),
    "a point too many": (lambda found: replace(found, data=np.ones((2, 2, 2), complex)), "(2, 2, 2)"),
    "a flag too few": (lambda found: replace(found, over_limit=(False,)), "1 limit flags"),
}


@pytest.mark.parametrize("how", MANGLED)
@pytest.mark.filterwarnings("ignore:invalid value:RuntimeWarning")
def test_a_reading_that_is_not_all_numbers_is_refused(how: str) -> None:
    mangle, words = MANGLED[how]
    stage = Stage([*point(2.2e9), *point(2.3e9)])
    stage.bench.mangle = lambda found: mangle(found) if len(stage.bench.swept) == 2 else found
    error, outcome = stage.fails(ReplyError)
    assert words in str(error)
    assert (outcome.state, outcome.readings) == ("failed", 1)


def test_a_scalar_that_is_not_a_number_is_refused() -> None:
    stage = Stage(point(2.2e9, scalars=("meter.power",)))
    stage.bench.scalars["meter.power"] = float("nan")
    error, _ = stage.fails(ReplyError)
    assert "meter.power" in str(error)


def test_a_protection_that_tripped_ends_the_run_and_marks_the_reading() -> None:
    stage = Stage([UP, *point(2.2e9), *point(2.3e9)])
    stage.bench.tripped = {"drain"}
    error, outcome = stage.fails(InstrumentError)
    assert "protection of drain has tripped" in str(error)
    assert outcome.readings == 1
    assert stage.writer.committed[0].flags == ("tripped:drain",)


def test_without_bias_nobody_asks_for_its_protection() -> None:
    stage = Stage(point(2.2e9))
    stage.run()
    assert "supply drain tripped?" not in stage.bench.story


# Procedures


def test_a_procedure_works_in_the_dark_and_is_written_down() -> None:
    stage = Stage([*point(2.2e9), UP, *point(2.3e9)])
    stage.run()
    worked = stage.after("analyser sweep")
    assert worked[:3] == ["analyser rf off", "pump rf off", "supply gate.voltage -5"]
    (event,) = stage.writer.told("procedure")
    assert (event.text, event.detail["found"]) == ("gate -5 V, drain 28 V", {"drain_v": 28.0})
    assert ("bring-up", "gate -5 V, drain 28 V") in stage.progress.phases


def test_the_way_down_is_drain_before_gate_with_the_drain_read_back() -> None:
    stage = Stage([UP, *point(2.2e9)])
    outcome = stage.run()
    down = [
        line for line in stage.bench.story if line.startswith(("supply", "pump rf", "analyser rf", "analyser sweep"))
    ]
    down = down[len(down) - down[::-1].index("analyser sweep") - 1 :]
    assert down[0] == "analyser sweep"  # the receiver sees that RF is off
    assert down[1] == "supply drain off"
    assert set(down[2:-1]) == {"supply drain.voltage?"}
    assert len(down[2:-1]) > 1
    assert down[-1] == "supply gate off"
    assert outcome.safe.text.startswith("sources off, drain off (0.")
    assert outcome.safe.text.endswith("V read back), gate released: confirmed")
    assert ("bring-down", outcome.safe.text) in stage.progress.phases


def test_a_bench_that_was_left_on_is_brought_to_rest_first() -> None:
    stage = Stage(point(2.2e9))
    supply = stage.bench.supply_
    supply.on, supply.volts = {"gate": True, "drain": True}, {"gate": -2.8, "drain": 28.0}
    stage.bench.rf = {"pump"}
    stage.run()
    assert stage.bench.story.index("supply gate off") < stage.bench.story.index("pump prepare")
    assert not stage.bench.harm


# The operator


def test_the_operator_is_asked_in_the_dark() -> None:
    stage = Stage([UP, *point(2.2e9), AskAction("Connect OPEN.", ("Hands off.",), ("output", "open")), *point(2.3e9)])
    dark: list[bool] = []
    stage.prompter = asks(then=lambda: dark.append(stage.bench.dark))
    outcome = stage.run()
    assert dark == [True]
    (prompt,) = stage.prompter.prompts
    assert (prompt.text, prompt.cautions, prompt.connect) == ("Connect OPEN.", ("Hands off.",), ("output", "open"))
    assert prompt.confirmed.startswith("RF off and drain off, read back at ")
    assert stage.bench.supply_.on["gate"] is False
    assert stage.progress.paused == 1
    assert outcome.readings == 2
    assert not stage.bench.harm


def test_the_gate_stays_on_while_the_operator_is_asked() -> None:
    stage = Stage([UP, AskAction("Look.")])
    held: list[bool] = []
    stage.prompter = asks(then=lambda: held.append(stage.bench.supply_.on["gate"]))
    stage.run()
    assert held == [True]


def test_what_is_skipped_is_not_made_up() -> None:
    actions = [
        AskAction("Connect OPEN."), UP, *point(2.2e9), *point(2.3e9), SetAction((("drain.voltage", 20.0),)),
        AskAction("Connect DEVICE."), ReadAction("hot", capture(2.3e9), BOTH),
    ]  # fmt: skip
    stage = Stage(actions)
    stage.prompter = asks({"Connect OPEN.": "skip"})
    outcome = stage.run()
    assert [r.index for r in stage.writer.committed] == [2]
    assert (outcome.state, outcome.readings, outcome.skipped) == ("complete", 1, 2)
    (event,) = stage.writer.told("skipped")
    assert (event.detail["first"], event.detail["last"]) == (0, 1)
    assert not [line for line in stage.bench.story if "drain on" in line or "drain.voltage 20" in line]
    assert "pump frequency 2.293e+09" in stage.bench.story  # the reading behind it stands where it should


def test_skipping_to_the_very_end_is_written_down() -> None:
    stage = Stage([AskAction("Connect OPEN."), *point(2.2e9)])
    stage.prompter = asks({"Connect OPEN.": "skip"})
    assert stage.run().skipped == 1
    assert len(stage.writer.told("skipped")) == 1


def test_the_operator_stops_the_run() -> None:
    stage = Stage([*point(2.2e9), AskAction("Connect OPEN."), *point(2.3e9)])
    stage.prompter = asks({"Connect OPEN.": "stop"})
    error, outcome = stage.fails(StoppedError)
    assert (outcome.state, outcome.readings) == ("stopped", 1)
    assert "1 of 2 readings are safe in" in str(error)


def test_nobody_there_is_refused_before_anything_is_touched() -> None:
    stage = Stage([*point(2.2e9), AskAction("Connect OPEN."), AskAction("Connect SHORT.")])
    with pytest.raises(InputError, match="asks the operator 2 times") as caught:
        stage.run()
    assert stage.bench.exchanges == 0
    assert outcome_of(caught.value) is None


def test_a_rehearsal_connects_what_is_asked_for() -> None:
    connected: list[tuple[str, str]] = []
    stage = Stage([AskAction("Connect OPEN.", connect=("output", "open")), AskAction("Look.")])
    stage.prompter = RehearsalPrompter(lambda plane, what: connected.append((plane, what)))
    stage.run()
    assert connected == [("output", "open")]


def test_the_operator_is_not_asked_while_a_drain_is_up() -> None:
    stage = Stage([UP, AskAction("Connect OPEN.")])
    stage.bench.fall_s = 60.0
    stage.prompter = asks()
    error, outcome = stage.fails(UnsafeError)
    assert not stage.prompter.prompts
    assert outcome.unconfirmed == ("drain",)
    assert "DRAIN NOT CONFIRMED" in str(error)


def test_the_operator_is_not_asked_while_a_receiver_sees_rf() -> None:
    stage = Stage([*point(2.2e9), AskAction("Connect OPEN.")])
    stage.bench.leaking = {"pump"}
    stage.prompter = asks()
    error, _ = stage.fails(UnsafeError)
    assert not stage.prompter.prompts
    assert "still sees" in str(error)


# Ways out


def test_a_run_that_came_to_its_end_and_is_not_safe_is_not_done() -> None:
    stage = Stage([UP, *point(2.2e9)])
    stage.bench.fall_s = 60.0
    error, outcome = stage.fails(UnsafeError)
    assert (outcome.state, outcome.readings, outcome.unconfirmed) == ("unsafe", 1, ("drain",))
    assert "off, and still at 2" in str(error)
    assert "gate not touched (still at -5.0 V)" in str(error)


def test_a_reference_that_is_not_locked_is_told_at_once() -> None:
    stage = Stage(point(2.2e9))
    stage.bench.unlocked = {"pump"}
    stage.run()
    (event,) = stage.writer.told("reference")
    assert (event.text, event.detail) == ("pump NOT locked, probe locked", {"pump": False, "probe": True})
    assert "pump NOT locked" in stage.progress.messages[0]


def test_a_stop_is_taken_after_the_reading_is_committed() -> None:
    stage = Stage([*point(2.2e9), *point(2.3e9), *point(2.4e9)])
    stage.writer = MemoryWriter(on_commit=lambda: stage.stop.request("Ctrl-C") if stage.writer.readings == 1 else None)
    error, outcome = stage.fails(StoppedError)
    assert (outcome.state, outcome.readings) == ("stopped", 2)
    assert outcome.cause == "stopped by Ctrl-C"
    assert "stopped by Ctrl-C." in str(error)
    assert "2 of 3 readings are safe in" in str(error)


def test_a_stop_ends_a_procedure_between_two_exchanges() -> None:
    stage = Stage([UP, *point(2.2e9)])
    stage.bench.clock.on_sleep = lambda _s: (
        stage.stop.request("SIGTERM") if "supply gate on" in stage.bench.story and not stage.stop.requested else None
    )
    _, outcome = stage.fails(StoppedError)
    assert outcome.cause == "stopped by SIGTERM"
    assert "supply drain on" not in stage.bench.story


def test_a_stop_ends_a_long_settling_time_at_once() -> None:
    stage = Stage([SettleAction(3600.0, BOTH), *point(2.2e9)], clock=FakeClock(virtual=False))
    stage.bench.clock.on_sleep = lambda s: stage.stop.request("Ctrl-C") if s == 3600.0 else None
    _, outcome = stage.fails(StoppedError)
    assert outcome.readings == 0
    assert stage.bench.clock.ns < 3600 * 10**9


def test_an_operator_may_press_ctrl_c() -> None:
    stage = Stage([AskAction("Connect OPEN."), *point(2.2e9)])
    stage.prompter = asks(then=lambda: stage.stop.request("Ctrl-C"))
    _, outcome = stage.fails(StoppedError)
    assert outcome.state == "stopped"


def test_the_last_exchanges_of_what_failed_go_into_the_archive() -> None:
    stage = Stage([*point(2.2e9), *point(2.3e9)])
    stage.bench.words["pump frequency 2.293e+09"] = no_answer
    error, outcome = stage.fails(NoAnswerError)
    assert outcome.state == "failed"
    (said,) = stage.writer.told("exchanges")
    assert said.detail["instrument"] == "pump"
    assert "did not answer 'frequency 2.293e+09'" in str(error)
    assert said.detail["exchanges"][-1]["error"]
    assert [event.kind for event in stage.writer.events] == ["reference", "exchanges", "failure", "safe-state"]


def test_an_instrument_that_is_gone_is_shouted_and_the_gate_is_left_alone() -> None:
    stage = Stage([UP, *point(2.2e9), *point(2.3e9)])
    stage.writer = MemoryWriter(on_commit=lambda: stage.bench.dead.add("pump"))
    error, outcome = stage.fails(UnsafeError)
    assert error.exit_code == 6  # type: ignore[attr-defined]
    assert isinstance(error.__cause__, BenchError)
    assert outcome.state == "unsafe"
    assert outcome.unconfirmed == ("pump", "RF off")
    assert "probe off confirmed" in str(error)
    assert "drain below 1 V confirmed" in str(error)
    assert "gate not touched (still at -5.0 V)" in str(error)
    assert "PUMP NOT CONFIRMED, RF OFF NOT CONFIRMED. Check it before you touch the bench" in str(error)
    assert "receiver incident still sees 10.0 dBm at the pump" in str(error)
    assert "1 of 2 readings are safe in" in str(error)
    assert stage.bench.supply_.on == {"gate": True, "drain": False}


def test_a_supply_that_is_gone_leaves_the_gate_alone() -> None:
    stage = Stage([UP, *point(2.2e9)])
    stage.bench.words["supply drain tripped?"] = dies
    error, outcome = stage.fails(UnsafeError)
    assert outcome.unconfirmed == ("drain",)
    assert "gate not touched." in str(error).replace(",", ".")
    assert "supply gate off" not in stage.after("supply drain on")


def test_a_full_disk_ends_the_run_in_order() -> None:
    stage = Stage([UP, *point(2.2e9), *point(2.3e9)])

    def full() -> None:
        if stage.writer.readings == 1:
            raise DiskError("archive.sqlite: the disk is full")

    stage.writer = MemoryWriter(on_commit=full)
    error, outcome = stage.fails(DiskError)
    assert (outcome.state, outcome.readings) == ("failed", 1)
    assert "the disk is full" in str(error)
    assert "1 of 2 readings are safe in" in str(error)


def test_a_disk_that_fails_only_at_the_end_is_told_too() -> None:
    stage = Stage(point(2.2e9))

    def full(event: Any) -> int:
        if event.kind == "safe-state":
            raise DiskError("archive.sqlite: the disk is full")
        return 1

    stage.writer.log = full  # type: ignore[method-assign]
    _, outcome = stage.fails(DiskError)
    assert outcome.readings == 1


def test_our_own_defect_makes_safe_and_stays_what_it_is() -> None:
    stage = Stage([*point(2.2e9), ProcedureAction("bring-up", {})])
    stage.schedule.actions.append(object())  # type: ignore[arg-type]
    _, outcome = stage.fails(KeyError)
    assert outcome.state == "failed"


def test_time_left_shrinks_to_nothing() -> None:
    stage = Stage([action for hz in np.linspace(2.2e9, 2.4e9, 10).tolist() for action in point(hz)], slot_s=3.0)
    stage.run()
    assert stage.progress.indices == list(range(10))
    bench_left_s = [bench_left_s for _, bench_left_s in stage.progress.lefts]
    assert bench_left_s == pytest.approx([30.0 - 3.0 * k for k in range(10)])
    assert all(left_s > 0.0 for left_s, _ in stage.progress.lefts[:-1])
    assert stage.progress.lefts[-1][0] == 0.0


def test_on_a_real_bench_bench_time_is_time() -> None:
    stage = Stage([*point(2.2e9), *point(2.3e9)], clock=FakeClock(virtual=False))
    stage.run()
    assert all(left_s == bench_left_s for left_s, bench_left_s in stage.progress.lefts)


@pytest.mark.parametrize("asked_before", [False, True])
def test_signals_while_the_run_turns_to_making_safe_do_not_keep_it_from_that(
    monkeypatch: pytest.MonkeyPatch, asked_before: bool
) -> None:
    stage = Stage([UP, *point(2.2e9)])
    if asked_before:
        stage.writer = MemoryWriter(on_commit=lambda: stage.stop.request("Ctrl-C"))
    feed = Machine.feed

    def interrupted(machine: Machine, event: Event, *told: Any, **more: Any) -> Any:
        commands = feed(machine, event, *told, **more)
        if event in (Event.END, Event.STOP):
            stage.stop.request("Ctrl-C")
            stage.stop.request("Ctrl-C")
        return commands

    monkeypatch.setattr(Machine, "feed", interrupted)
    outcome = stage.fails(StoppedError)[1] if asked_before else stage.run()
    assert outcome.safe.safe
    assert stage.bench.dark
    assert stage.bench.supply_.on == {"gate": False, "drain": False}
