"""The same seed gives the same readings, another seed another bench; and every reading starts at its time."""

from __future__ import annotations

import math
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest

from benchrun.archive import open_archive
from benchrun.flow import RunResult
from benchrun.flow.inputs import load_inputs
from benchrun.flow.known import made_in
from benchrun.flow.planning import plan
from tests.flow.conftest import Way
from tests.flow.stage import CALIBRATE, HOT, LEVEL


def digest(run: Path) -> str:
    with open_archive(run) as archive:
        return archive.digest()


def schedule_hash(run: Path) -> str:
    with open_archive(run) as archive:
        return archive.meta.schedule_hash


def test_the_same_seed_gives_the_same_readings(small: Way, rehearse: Callable[..., RunResult], tmp_path: Path) -> None:
    """The whole way once more in another folder, and the hot run alone on the calibrations that are there."""
    elsewhere = rehearse(HOT, to=tmp_path / "elsewhere", seed=1).folder
    again = rehearse(HOT, seed=1).folder
    assert digest(elsewhere) == digest(again) == digest(small.hot)
    assert schedule_hash(elsewhere) == schedule_hash(again) == schedule_hash(small.hot)
    for first, second in zip(
        sorted(small.runs.glob("*_bench_*")), sorted((tmp_path / "elsewhere").glob("*_bench_*")), strict=True
    ):
        assert (digest(first), schedule_hash(first)) == (digest(second), schedule_hash(second))


def test_without_a_seed_it_is_1(small: Way, rehearse: Callable[..., RunResult]) -> None:
    assert digest(rehearse(HOT).folder) == digest(small.hot)


def test_another_seed_gives_another_bench(small: Way, rehearse: Callable[..., RunResult]) -> None:
    for recipe, first in ((CALIBRATE, small.calibration), (LEVEL, small.levelling)):
        assert digest(rehearse(recipe, seed=2).folder) != digest(first)


def test_the_same_seed_gives_the_same_files(small: Way, rehearse: Callable[..., RunResult]) -> None:
    again = rehearse(HOT, seed=1).folder
    for path in (small.hot / "touchstone").iterdir():
        one, other = (data(folder / "touchstone" / path.name) for folder in (small.hot, again))
        assert one == other
    assert (small.hot / "summary.csv").read_bytes() == (again / "summary.csv").read_bytes()


def data(path: Path) -> list[str]:
    return [line for line in path.read_text("iso-8859-1").splitlines() if not line.startswith("!")]


@pytest.mark.parametrize("seed", [3, 4])
def test_never_a_number_that_is_none(rehearse: Callable[..., RunResult], tmp_path: Path, seed: int) -> None:
    rehearse(HOT, to=tmp_path / "seeds", seed=seed)
    for summary in (tmp_path / "seeds").glob("*/summary.csv"):
        header, *rows = summary.read_text("utf-8").splitlines()
        assert rows
        for name, *values in zip(header.split(","), *(row.split(",") for row in rows), strict=True):
            if name != "flags":
                assert all(math.isfinite(float(value)) for value in values), (summary, name)


@pytest.mark.parametrize("recipe", [CALIBRATE, LEVEL, HOT])
def test_every_reading_starts_at_its_time_in_the_timetable(small: Way, recipe: str) -> None:
    """So that a rehearsal that is taken up again in the middle meets the same noise."""
    run = {CALIBRATE: small.calibration, LEVEL: small.levelling, HOT: small.hot}[recipe]
    with open_archive(run) as archive:
        started_ns = np.array([reading.started_ns for reading in archive.readings()])
    levelled = {made.name: made.known for made in made_in(small.levelling)} if recipe == HOT else {}
    schedule = plan(load_inputs(small.recipes / recipe), levelled)
    planned_ns = np.array([schedule.start_ns(index) for index in range(len(schedule))])
    assert np.unique(started_ns - planned_ns).tolist() == [5_000_000_000]
