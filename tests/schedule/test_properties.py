"""For any recipe: a walk from the middle is a walk from the beginning, and the columns are what the walk says."""

from __future__ import annotations

from collections.abc import Iterable

import numpy as np
from hypothesis import HealthCheck, assume, given, settings

from benchrun.bench import Bench as BenchFile
from benchrun.contract.actions import AskAction, ProcedureAction, ReadAction, SetAction, SettleAction
from benchrun.errors import FileProblemsError
from benchrun.quantities import column
from benchrun.schedule import PlannedAction, Schedule
from benchrun.schedule.columns import ON
from benchrun.schedule.timing import ActionTimes, Timing

from .made import KNOWN, changed_bench, example_bench, schedule_from
from .programs import acquires

SLOW = settings(max_examples=40, deadline=None, suppress_health_check=list(HealthCheck))
#: A few messages, which a round may save.
LONGEST_WAIT_NS = 5_000_000
SOURCES = ("probe.level", "probe.frequency", "pump.level", "pump.frequency")


#: Mistakes that recipes at random may make.
CONTRADICTIONS = ("later in the same sweep", "is swept around this step", "IF bandwidth")


def schedule_unless_refused(acquire: str, bench: BenchFile | None = None) -> Schedule:
    """Return the schedule; recipes that contradict themselves are left out."""
    try:
        return schedule_from(acquire, bench)
    except FileProblemsError as error:
        assume(not all(any(known in problem.message for known in CONTRADICTIONS) for problem in error.problems))
        raise


class Bench:
    """What has been done to a bench: the last value of everything, connections, and whether the device is biased."""

    def __init__(self) -> None:
        self.values: dict[str, float] = {}
        self.connected: dict[str, str] = {}
        self.procedures: list[object] = []
        self.on: tuple[str, ...] = ()

    def do(self, planned: PlannedAction) -> None:
        action = planned.action
        if isinstance(action, SetAction):
            self.values.update(action.values)
        elif isinstance(action, SettleAction | ReadAction):
            self.on = action.signals
        else:
            self.on = ()
            for name in [n for n in self.values if n.startswith(("drain", "gate"))]:
                del self.values[name]
        if isinstance(action, ProcedureAction):
            self.procedures.append(tuple(sorted(action.parameters.items(), key=str)))
        if isinstance(action, AskAction):
            self.procedures.clear()
            self.connected.update([action.connect] if action.connect else [])


def bench_before(walk: Iterable[PlannedAction], index: int) -> Bench:
    bench = Bench()
    for planned in walk:
        if planned.reading_index == index:
            return bench
        bench.do(planned)
    raise AssertionError(f"reading {index} never came")


@SLOW
@given(acquires())
def test_a_walk_from_the_middle_is_the_walk_from_the_beginning(acquire: str) -> None:
    schedule = schedule_unless_refused(acquire)
    whole = list(schedule.walk())
    for index in range(len(schedule)):
        at = next(n for n, planned in enumerate(whole) if planned.reading_index == index)
        part = list(schedule.walk(index))
        first = next(n for n, planned in enumerate(part) if planned.reading_index == index)
        assert part[first:] == whole[at:]
        assert not [planned for planned in part[:first] if planned.reading_index is not None]
        through, directly = bench_before(whole, index), bench_before(part, index)
        assert directly.connected == through.connected
        assert directly.procedures[-1:] == through.procedures[-1:]
        assert directly.values == through.values


@SLOW
@given(acquires())
def test_while_rf_is_on_at_a_reading_everything_stands_as_its_conditions_say(acquire: str) -> None:
    schedule = schedule_unless_refused(acquire)
    settables = example_bench().settables()
    for start in range(len(schedule)):
        bench = Bench()
        for planned in schedule.walk(start):
            bench.do(planned)
            if planned.reading_index is not None:
                for name, value in bench.values.items():
                    key = column(name, settables[name].kind)
                    swept = key == "probe.frequency_hz" and planned.action.name in ("c", "d")  # type: ignore[union-attr]
                    assert swept or planned.conditions[key] == value
                for name in planned.action.signals:  # type: ignore[union-attr]
                    assert f"{name}.level" in bench.values
                break


@SLOW
@given(acquires())
def test_columns_are_the_conditions_of_the_walk(acquire: str) -> None:
    schedule = schedule_unless_refused(acquire)
    walked = {p.reading_index: p.conditions for p in schedule.walk() if p.reading_index is not None}
    seen = set()
    for columns in schedule.columns(chunk=3):
        for n, index in enumerate(columns.index.tolist()):
            numbers, words = columns.row(n)
            named = {column(name, schedule.kinds[name]): value for name, value in numbers.items()} | words
            if columns.read is not None and columns.read.grid_hz:
                named.pop("probe.frequency_hz")
            expected = dict(walked[index])
            if columns.read is not None and columns.read.name == "c":
                named.pop("probe.frequency_hz", None)
                expected.pop("probe.frequency_hz", None)
            assert named == expected
            seen.add(index)
    assert seen == set(range(len(schedule)))


@SLOW
@given(acquires())
def test_every_state_that_sources_are_in_while_rf_is_on_is_among_the_moments_or_the_readings(acquire: str) -> None:
    schedule = schedule_unless_refused(acquire)
    looked_at = set()
    for columns in schedule.moments(chunk=5):
        for n in range(len(columns.index)):
            on = columns.vocabulary[columns.words[ON][n]] if ON in columns.words else ""
            looked_at.add((on, tuple(columns.row(n)[0].get(name) for name in SOURCES)))
    for columns in schedule.columns():
        assert columns.read is not None
        for n in range(len(columns.index)):
            looked_at.add((" ".join(columns.read.signals), tuple(columns.row(n)[0].get(name) for name in SOURCES)))
    bench = Bench()
    for planned in schedule.walk():
        bench.do(planned)
        if isinstance(planned.action, SetAction | SettleAction) and bench.on:
            assert (" ".join(bench.on), tuple(bench.values.get(name) for name in SOURCES)) in looked_at


@SLOW
@given(acquires())
def test_the_timetable_waits_for_its_actions_and_hardly_longer(acquire: str) -> None:
    """With levels that need no ramp no reading comes late; a round that finds more standing waits.

    Every round but the first is given the second one's time: what the first leaves behind may save a message later.
    """
    bench = changed_bench(("ramp: 3 dB", "ramp: 99 dB"), ("ramp: 6 dB", "ramp: 99 dB"))
    schedule = schedule_unless_refused(acquire, bench)
    times, at_ns = ActionTimes(bench, Timing(), KNOWN), 0
    for planned in schedule.walk():
        at_ns += times.before_ns(planned.action)
        if planned.reading_index is not None:
            starts_ns = schedule.start_ns(planned.reading_index)
            assert 0 <= starts_ns - at_ns <= LONGEST_WAIT_NS
            at_ns = starts_ns
        at_ns += times.after_ns(planned.action)
    assert 0 <= schedule.start_ns(len(schedule)) - at_ns <= LONGEST_WAIT_NS


@SLOW
@given(acquires())
def test_starts_rise_from_reading_to_reading(acquire: str) -> None:
    schedule = schedule_unless_refused(acquire)
    starts = [schedule.start_ns(index) for index in range(len(schedule) + 1)]
    assert all(np.diff(starts) >= 0)
