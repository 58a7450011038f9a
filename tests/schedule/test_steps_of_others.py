"""Steps that others bring: several actions at once, values from conditions, and what a step must not do."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from typing import Any

import pytest
from benchrun_plugins.steps import STEPS

from benchrun.contract.actions import Action, ProcedureAction, ReadAction, SetAction, SettleAction
from benchrun.contract.capture import Capture
from benchrun.contract.hooks import StepScope, StepSpec
from benchrun.errors import FileProblemsError, PluginError
from benchrun.plan.levels import check_levels
from benchrun.schedule import Schedule
from benchrun.yaml_source import Strict

from .made import example_bench, schedule_from

START = """
  - set: {probe.level: 0 dBm, pump.level: -20 dBm, pump.frequency: 2 GHz}
  - sweep: {frequency: [2.1 GHz, 2.2 GHz, 2.3 GHz]}
    do:
      - set: {probe.frequency: "{frequency}"}
      - own: {}
"""


class Nothing(Strict):
    """A step without parameters."""


def with_step(expand: Callable[[Any, StepScope], Iterator[Action]], acquire: str = START) -> Schedule:
    own = StepSpec("own", Nothing, "A step of somebody's.", expand, duration_s=lambda _parameters: 7.0)
    return schedule_from(acquire, steps={**{step.key: step for step in STEPS}, "own": own})


def capture(frequency_hz: float) -> Capture:
    return Capture(("incident",), ("probe",), (0.0,), (frequency_hz,), 300.0)


def two_levels(_model: Any, scope: StepScope) -> Iterator[Action]:
    """Read at two levels; each reading sees what was set just before."""
    for level in (-10.0, -5.0):
        yield SetAction((("probe.level", level),))
        yield SettleAction(0.01, ("probe",))
        assert scope.conditions["probe.level"] == level
        yield ReadAction("own", capture(scope.conditions["probe.frequency"]), ("probe",))


def test_a_step_may_read_twice_and_sees_what_it_has_set() -> None:
    acquire = START.replace("probe.level: 0 dBm, ", "probe.level: -5 dBm, ")
    schedule = with_step(two_levels, acquire)
    assert len(schedule) == 6
    levels = [schedule.reading(index).conditions["probe.level_dbm"] for index in range(6)]
    assert levels == [-10.0, -5.0] * 3
    assert schedule.reading(3).conditions["frequency_hz"] == 2.2e9


def test_standing_in_the_middle_of_a_step() -> None:
    schedule = with_step(two_levels)
    whole = [planned for planned in schedule.walk() if planned.reading_index is not None]
    for index in range(6):
        first = next(planned for planned in schedule.walk(index) if planned.reading_index is not None)
        assert first == whole[index]


def test_columns_of_a_step_that_reads_twice() -> None:
    """The table works a step out as a whole; what a reading looks at in between is the step's own matter."""

    def expand(_model: Any, scope: StepScope) -> Iterator[Action]:
        for level in (-10.0, -5.0):
            yield SetAction((("probe.level", level),))
            yield ReadAction("own", capture(scope.conditions["probe.frequency"]), ("probe",))

    schedule = with_step(expand)
    found = {}
    for columns in schedule.columns():
        found |= dict(zip(columns.index.tolist(), columns.values["probe.level"].tolist(), strict=True))
    assert found == {0: -10.0, 1: -5.0, 2: -10.0, 3: -5.0, 4: -10.0, 5: -5.0}


def test_a_step_may_choose_by_a_condition() -> None:
    def expand(_model: Any, scope: StepScope) -> Iterator[Action]:
        level = -30.0 if scope.conditions["frequency"] > 2.15e9 else -12.0
        yield SetAction((("probe.level", level),))
        yield ReadAction("own", capture(scope.conditions["frequency"]), ("probe",))

    schedule = with_step(expand)
    assert [schedule.reading(index).conditions["probe.level_dbm"] for index in range(3)] == [-12.0, -30.0, -30.0]
    columns = next(schedule.columns())
    assert columns.values["probe.level"].tolist() == [-12.0, -30.0, -30.0]


def test_a_step_that_counts_up_from_round_to_round_is_refused() -> None:
    def expand(_model: Any, scope: StepScope) -> Iterator[Action]:
        yield SetAction((("probe.level", scope.conditions["probe.level"] + 1.0),))
        yield ReadAction("own", None, ("probe",))

    with pytest.raises(FileProblemsError, match=r"probe\.level is set later in the same sweep"):
        with_step(expand)


def test_a_step_that_reads_other_things_at_other_conditions_is_refused() -> None:
    def expand(_model: Any, scope: StepScope) -> Iterator[Action]:
        yield ReadAction("low" if scope.conditions["frequency"] < 2.2e9 else "high", None, ("probe",))

    with pytest.raises(FileProblemsError, match="A step always does and reads the same"):
        with_step(expand)


def test_a_step_that_sets_other_things_at_other_conditions_is_refused() -> None:
    def expand(_model: Any, scope: StepScope) -> Iterator[Action]:
        name = "probe.level" if scope.conditions["frequency"] > 2.25e9 else "pump.level"
        yield SetAction(((name, -20.0),))
        yield ReadAction("own", None, ("probe",))

    with pytest.raises(FileProblemsError, match=r"it sets probe\.level; reads\."):
        with_step(expand)


def test_and_where_only_the_level_check_comes_by() -> None:
    def expand(_model: Any, scope: StepScope) -> Iterator[Action]:
        name = "probe.level" if scope.conditions["frequency"] > 2.35e9 else "pump.level"
        yield SetAction(((name, -20.0),))
        yield ReadAction("own", None, ("probe",))

    acquire = START.replace("2.1 GHz, 2.2 GHz, 2.3 GHz", "2.1 GHz, 2.2 GHz, 2.4 GHz, 2.3 GHz")
    with pytest.raises(PluginError, match=r"recipe\.yaml:11: step 'own' does other things at some conditions"):
        check_levels(
            with_step(expand, acquire.replace("2.4 GHz, 2.3 GHz", "2.4 GHz, 2.11 GHz, 2.12 GHz")), example_bench()
        )


@pytest.mark.parametrize(
    ("action", "says"),
    [
        (SetAction((("probe.level", float("nan")),)), "probe.level would be nan"),
        (SetAction((("probe.phase", 1.0),)), "nothing that can be set is called 'probe.phase'"),
        (SetAction((("probe.level", 99.0),)), "probe.level would be"),
        (SettleAction(1.0, ("pilot",)), "pilot"),
    ],
)
def test_what_no_step_may_yield(action: Action, says: str) -> None:
    def expand(_model: Any, _scope: StepScope) -> Iterator[Action]:
        yield action
        yield ReadAction("own", None, ("probe",))

    with pytest.raises(FileProblemsError, match=says):
        with_step(expand)


def test_a_step_that_breaks_is_told_as_such() -> None:
    def expand(_model: Any, scope: StepScope) -> Iterator[Action]:
        yield SetAction((("probe.level", scope.conditions["no such thing"]),))

    with pytest.raises(
        FileProblemsError, match=r"step 'own' broke \(KeyError\('no such thing'\)\)\. Tell whoever wrote"
    ):
        with_step(expand)


def test_a_procedures_time_is_what_its_step_says() -> None:
    def expand(_model: Any, _scope: StepScope) -> Iterator[Action]:
        yield ProcedureAction("own", {})
        yield ReadAction("own", None, ("probe",))

    assert 3 * 7.0 < with_step(expand).duration_s < 3 * 7.0 + 0.2
