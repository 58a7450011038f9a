"""Ctrl-C, SIGTERM and SIGKILL in the middle of a rehearsal in real time, seen from the world's side."""

from __future__ import annotations

import os
import re
import signal
import subprocess
import sys
import time
from collections.abc import Iterator
from pathlib import Path
from typing import Any

import pytest

from benchrun import flow
from benchrun.archive import open_archive
from benchrun.errors import FolderError
from tests.faults.flow.runs import RECIPE

pytestmark = pytest.mark.skipif(os.name != "posix", reason="POSIX signals")
LONG = RECIPE.replace("points: 2}", "points: 300}")
PATIENCE_S = 60.0


class Rehearsal:
    """A rehearsal in a process of its own, on a world that is served by this one."""

    def __init__(self, recipes: Path) -> None:
        (recipes / "small.recipe.yaml").write_text(LONG)
        bench = recipes / "served.bench.yaml"
        self.served: Any = flow.simulate(recipes / "balloon-driver.bench.yaml", 1, bench)
        self.runs = recipes.parent / "runs"
        recipe = recipes / "small.recipe.yaml"
        command = ["rehearse", recipe, "--bench", bench, "--to", self.runs, "--real-time"]
        self.process = subprocess.Popen(
            [sys.executable, "-m", "benchrun", *map(str, command)],
            stdout=subprocess.PIPE,
            stderr=subprocess.PIPE,
            text=True,
            start_new_session=True,
        )
        self.out = self.err = ""

    @property
    def world(self) -> Any:
        return self.served._served.rack.world

    @property
    def folder(self) -> Path:
        (folder,) = self.runs.iterdir()
        return folder

    def wait_for_readings(self, count: int) -> None:
        ends = time.monotonic() + PATIENCE_S
        while self.readings() < count:
            assert self.process.poll() is None, self.process.communicate()
            assert time.monotonic() < ends, "it takes too long"
            time.sleep(0.05)

    def readings(self) -> int:
        try:
            with open_archive(self.folder) as archive:
                return archive.count
        except (FolderError, FileNotFoundError, ValueError):
            return 0

    def end(self, number: int) -> int:
        """Send a signal and return the exit code."""
        self.process.send_signal(number)
        self.out, self.err = self.process.communicate(timeout=PATIENCE_S)
        return self.process.returncode

    def radiating(self) -> list[str]:
        return [name for name in ("pump", "analyser") if self.world.source(name).on]

    def close(self) -> None:
        if self.process.poll() is None:
            self.process.kill()
            self.process.communicate()
        self.served.close()


@pytest.fixture
def rehearsal(recipes: Path) -> Iterator[Rehearsal]:
    running = Rehearsal(recipes)
    yield running
    running.close()


@pytest.mark.parametrize(("number", "words"), [(signal.SIGINT, "Ctrl-C"), (signal.SIGTERM, "SIGTERM")])
def test_a_stop_in_the_middle(rehearsal: Rehearsal, number: int, words: str) -> None:
    rehearsal.wait_for_readings(3)
    assert rehearsal.world.supplies.bias("drain").on
    assert rehearsal.end(number) == 4
    said = [line for line in rehearsal.err.splitlines() if not line.startswith("`benchrun resume ")]
    assert re.fullmatch(rf"\d\d:\d\d:\d\d  stopped by {words}\.", said[-3]), rehearsal.err
    assert re.fullmatch(
        r"Made safe: sources off, drain off \(0\.\d V read back\), gate released: confirmed\.", said[-2]
    )
    assert re.fullmatch(r"\d+ of 601 readings are safe in .+/archive\.sqlite\.", said[-1])
    assert "Traceback" not in rehearsal.err
    assert rehearsal.out.splitlines()[-1] == str(rehearsal.folder)
    assert rehearsal.world.damage == []
    assert rehearsal.radiating() == []
    assert not rehearsal.world.supplies.bias("drain").on
    assert not rehearsal.world.supplies.bias("gate").on
    with open_archive(rehearsal.folder) as archive:
        assert archive.check() == []
        assert archive.meta.state == "stopped"
        assert said[-1].startswith(f"{archive.count} of ")
        assert archive.count == archive.count_all >= 3


def test_killed_in_the_middle(rehearsal: Rehearsal) -> None:
    """Nothing can be switched off by a process that is dead; what it had committed is there, once each."""
    rehearsal.wait_for_readings(3)
    before = rehearsal.readings()
    assert rehearsal.end(signal.SIGKILL) == -signal.SIGKILL
    with open_archive(rehearsal.folder) as archive:
        assert archive.check() == []
        assert archive.meta.state == "running"
        indices = [reading.index for reading in archive.readings(every_attempt=True)]
    assert indices == list(range(len(indices)))
    assert len(indices) >= before


def test_a_second_ctrl_c_does_not_hurry_the_safe_state(rehearsal: Rehearsal) -> None:
    rehearsal.wait_for_readings(2)
    for _ in range(5):
        rehearsal.process.send_signal(signal.SIGINT)
        time.sleep(0.01)
    assert rehearsal.end(signal.SIGINT) == 4, rehearsal.err
    assert "gate released: confirmed." in rehearsal.err
    assert rehearsal.world.damage == []
    assert rehearsal.radiating() == []
    assert not rehearsal.world.supplies.bias("drain").on
    with open_archive(rehearsal.folder) as archive:
        assert archive.check() == []
