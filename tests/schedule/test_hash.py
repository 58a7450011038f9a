"""The hash of a schedule: the same for the same recipe and bench, another one where anything else happens."""

from __future__ import annotations

import subprocess
import sys
from dataclasses import replace
from typing import Any

import numpy as np
import pytest

from benchrun.schedule import build_schedule

from .made import KNOWN, RECIPES, changed_bench, example_bench, example_recipe, recipe_from, schedule_from

ACQUIRE = """
  - set: {probe.level: 0 dBm}
  - sweep: {frequency: {from: 2.2 GHz, to: 2.4 GHz, points: 3}}
    do:
      - set: {probe.frequency: "{frequency}"}
      - settle: 20 ms
      - read: {name: a}
"""


class Table:
    """A levelling that says so much."""

    def __init__(self, text: str) -> None:
        self.text = text

    def pump_level_dbm(self, drive_dbm: Any, frequency_hz: Any) -> Any:
        return np.asarray(drive_dbm) - 30.0 + 0.0 * np.asarray(frequency_hz)

    def to_document(self) -> dict[str, Any]:
        return {"text": self.text}


def test_it_is_a_sha256_and_the_same_each_time() -> None:
    first, second = schedule_from(ACQUIRE), schedule_from(ACQUIRE)
    assert first.hash == second.hash
    assert len(first.hash) == 64
    assert set(first.hash) <= set("0123456789abcdef")


@pytest.mark.parametrize("seed", ["0", "1"])
def test_it_is_the_same_in_another_process(seed: str) -> None:
    """Whatever order sets and dictionaries happen to have there."""
    code = "from tests.schedule.test_hash import ACQUIRE, schedule_from; print(schedule_from(ACQUIRE).hash)"
    found = subprocess.run(
        [sys.executable, "-c", code], capture_output=True, text=True, check=True, cwd=RECIPES.parent,
        env={"PYTHONHASHSEED": seed, "PYTHONPATH": "."},
    )  # fmt: skip
    assert found.stdout.strip() == schedule_from(ACQUIRE).hash


@pytest.mark.parametrize(
    ("before", "after"),
    [
        ("0 dBm", "0.1 dBm"),
        ("points: 3", "points: 4"),
        ("2.4 GHz", "2.5 GHz"),
        ("20 ms", "21 ms"),
        ("name: a", "name: b"),
        ("name: a}", "name: a, also: [drain.current]}"),
        ('"{frequency}"', '"{frequency} - 1 MHz"'),
    ],
)
def test_every_change_of_what_happens_changes_it(before: str, after: str) -> None:
    assert before in ACQUIRE
    assert schedule_from(ACQUIRE).hash != schedule_from(ACQUIRE.replace(before, after)).hash


def test_layout_and_comments_do_not_change_it() -> None:
    said_otherwise = ACQUIRE.replace("0 dBm", "0.0 dBm # quiet").replace("points: 3", "points:    3")
    written = said_otherwise.replace("{probe.level: 0.0 dBm # quiet}", "{probe.level: 0 dBm}     # quiet")
    assert schedule_from(ACQUIRE).hash == schedule_from(written).hash


def test_the_bench_is_in_it() -> None:
    assert (
        schedule_from(ACQUIRE).hash != schedule_from(ACQUIRE, changed_bench(("ceiling: 10 dBm", "ceiling: 9 dBm"))).hash
    )


def test_the_receivers_settings_are_in_it() -> None:
    recipe = recipe_from(ACQUIRE)
    wider = replace(
        recipe, file=recipe.file.model_copy(update={"receiver": recipe.receiver.model_copy(update={"averages": 4})})
    )
    one, other = (build_schedule(given, example_bench(), KNOWN).hash for given in (recipe, wider))
    assert one != other


def test_the_levelled_drive_is_in_it() -> None:
    hashes = {schedule_from(ACQUIRE, drive_gain=gain).hash for gain in (None, Table("one"), Table("other"))}
    assert len(hashes) == 3


def test_the_steps_are_in_it() -> None:
    """A step of the same key from elsewhere is another step."""

    def expand(model: Any, scope: Any) -> Any:
        return KNOWN["settle"].expand(model, scope)

    other = {**KNOWN, "settle": replace(KNOWN["settle"], expand=expand)}
    assert schedule_from(ACQUIRE).hash != schedule_from(ACQUIRE, steps=other).hash


def test_the_examples_differ() -> None:
    names = ["hot-output-match", "calibrate-output-plane", "level-the-drive", "cold-output-reflection"]
    assert len({build_schedule(example_recipe(name), example_bench(), KNOWN).hash for name in names}) == 4
