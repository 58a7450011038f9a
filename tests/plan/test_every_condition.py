"""The level check over arrays against one condition after the other, for recipes at random."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import pytest
from hypothesis import HealthCheck, assume, given, settings

from benchrun.contract.actions import ReadAction, SetAction, SettleAction
from benchrun.errors import FileProblemsError
from benchrun.plan.conditions import _different
from benchrun.plan.levels import check_levels
from benchrun.plan.waves import BenchLevels, Conditions, Setting
from benchrun.schedule import Schedule
from tests.schedule.made import example_bench, schedule_from
from tests.schedule.programs import acquires

#: Two tones together are at most so much above the louder one.
TOGETHER_DB = 6.03


def conditions_along(schedule: Schedule) -> Iterator[tuple[Conditions, ReadAction | None]]:
    """Yield what levels depend on at every reading, after every set and in every wait."""
    on: tuple[str, ...] = ()
    for planned in schedule.walk():
        action = planned.action
        if isinstance(action, ReadAction | SettleAction):
            on = action.signals
        elif not isinstance(action, SetAction):
            on = ()
        if isinstance(action, ReadAction | SetAction | SettleAction):
            read = action if isinstance(action, ReadAction) else None
            yield from ((one, read) for one in _at(planned.conditions, on, read))


def _at(named: dict[str, float | str], on: tuple[str, ...], read: ReadAction | None) -> Iterator[Conditions]:
    grid = read.capture.frequencies_hz if read is not None and read.capture is not None else (None,)
    for own_hz in grid:
        numbers = {name: value for name, value in named.items() if not isinstance(value, str)}
        if own_hz is not None:
            numbers["probe.frequency_hz"] = own_hz
        settings_ = {
            name: Setting(
                np.array([numbers.get(f"{name}.level_dbm", np.nan)]),
                np.array([numbers.get(f"{name}.frequency_hz", np.nan)]),
                np.array([name in on]),
            )
            for name in ("pump", "probe")
        }
        connected = {p: {str(named.get(f"connected.{p}", "device")): np.array([True])} for p in ("input", "output")}
        yield Conditions(settings_, np.array([numbers.get("drive_dbm", np.nan)]), connected)


@settings(max_examples=30, deadline=None, suppress_health_check=list(HealthCheck))
@given(acquires())
def test_the_worst_case_is_the_highest_of_all_conditions(acquire: str) -> None:
    try:
        schedule = schedule_from(acquire)
    except FileProblemsError:
        assume(False)
    table = check_levels(schedule, example_bench())
    highest: dict[tuple[str, str, str | None], float] = {}
    for conditions, read in conditions_along(schedule):
        for figure in BenchLevels(example_bench()).figures(conditions):
            level, kind = float(figure.level_dbm[0]), figure.limit.kind if figure.limit else None
            if not np.isnan(level) and not (kind == "linear" and figure.receiver and not _reads(read, figure.receiver)):
                key = figure.plane, figure.tone, kind
                highest[key] = max(level, highest.get(key, -np.inf))
    told = {(row.plane, row.tone, row.limit_kind): row for row in table.rows if row.tone in ("pump", "probe")}
    for key, row in told.items():
        assert row.level_dbm == pytest.approx(highest[key], abs=1e-9)
    loudest = {plane: max(v for (p, _, _), v in highest.items() if p == plane) for plane, _, _ in highest}
    for (plane, tone, _), level in highest.items():
        assert (plane, tone) in {key[:2] for key in told} or level <= loudest[plane] + TOGETHER_DB - 30.0


def _reads(read: ReadAction | None, receiver: str) -> bool:
    return read is not None and read.capture is not None and receiver in read.capture.waves


@given(acquires())
@settings(max_examples=10, deadline=None, suppress_health_check=list(HealthCheck))
def test_columns_may_come_in_pieces_of_any_size(acquire: str) -> None:
    try:
        schedule = schedule_from(acquire)
    except FileProblemsError:
        assume(False)
    whole = check_levels(schedule, example_bench())
    columns, moments = schedule.columns, schedule.moments
    schedule.columns = lambda: columns(2)  # type: ignore[method-assign,assignment,misc]
    schedule.moments = lambda: moments(3)  # type: ignore[method-assign,assignment,misc]
    in_pieces = check_levels(schedule, example_bench())
    assert [(r.plane, r.tone, r.level_dbm) for r in in_pieces.rows] == [
        (r.plane, r.tone, r.level_dbm) for r in whole.rows
    ]


def test_equal_rows_are_found_and_a_hash_that_lies_is_noticed() -> None:
    one = np.array([1.5, 2.5, 1.5, np.nan, np.nan]).view(np.int64)
    other = np.array([7, 7, 7, 7, 8])
    assert _different([one, other], 5).tolist() == [0, 1, 3, 4]
    assert _different([], 3).tolist() == [0]
