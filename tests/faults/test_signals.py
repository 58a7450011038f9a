"""A process that is told to stop: by Ctrl-C, a service manager, a terminal that goes away, an impatient hand."""

from __future__ import annotations

import os
import signal
import subprocess
import sys
import time
from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path

import pytest

from benchrun.archive import open_archive

RUN = """
import signal, sys, time
from dataclasses import replace
from pathlib import Path
from benchrun.acquire import RealClock, RefusingPrompter, Silent, acquire, outcome_of
from benchrun.archive import ArchiveWriter
from benchrun.contract.actions import ReadAction, SettleAction
from tests.acquire.fake_bench import BENCH, FakeBench, FakeClock, FakeSchedule, capture, meta
from tests.acquire.test_runner import BOTH, STEPS, UP, at

class Slow(FakeClock):
    def sleep(self, duration_s):
        super().sleep(duration_s)
        time.sleep(duration_s if duration_s != HANG_S else 60.0)

HANG_S = 0.123
bench = FakeBench(Slow(virtual=False), fall_s=0.01)
actions = [UP]
for k in range(2000):
    actions += [at(2.2e9 + k), SettleAction(0.005, BOTH), ReadAction("hot", capture(2.2e9 + k), BOTH)]
schedule = FakeSchedule(actions)
writer = ArchiveWriter.create(Path(sys.argv[1]), replace(meta(), readings_planned=len(schedule)))
hang_at = int(sys.argv[2])
commit = writer.commit

def announced(reading):
    commit(reading)
    print(reading.index, flush=True)
    if reading.index == hang_at:
        bench.faults[bench.exchanges + 2] = hang

def hang(session, what):
    print("hanging", flush=True)
    bench.clock.sleep(HANG_S)
    return ConnectionError("never")

writer.commit = announced
signal.signal(signal.SIGINT, lambda *_: None)  # given back by the run: what comes after it does not matter here
try:
    acquire(schedule, bench, BENCH, STEPS, writer, bench.clock, RefusingPrompter(), Silent())
except BaseException as error:
    outcome = outcome_of(error)
    writer.close(outcome.state)
    print(type(error).__name__, outcome.cause, bench.dark, bench.supply_.on, bench.harm, outcome.unconfirmed, sep="|")
    sys.exit(error.exit_code)
"""
SIGNALS = {"SIGINT": "Ctrl-C", "SIGTERM": "SIGTERM", "SIGHUP": "SIGHUP (the terminal went away)"}
pytestmark = pytest.mark.skipif(os.name == "nt", reason="POSIX signals")


@contextmanager
def running(folder: Path, hang_at: int = -1) -> Iterator[subprocess.Popen[str]]:
    root = Path(__file__).parents[2]
    command = [sys.executable, "-c", RUN, str(folder), str(hang_at)]
    with subprocess.Popen(command, stdout=subprocess.PIPE, text=True, cwd=root) as process:
        try:
            yield process
        finally:
            process.kill()


def wait_for(process: subprocess.Popen[str], word: str) -> None:
    assert process.stdout is not None
    for line in process.stdout:
        if line.strip() == word:
            return
    pytest.fail(f"the process ended before it said {word}")


def ended(process: subprocess.Popen[str], folder: Path) -> list[str]:
    """Wait for the end; return what the process said of it, the archive having been looked at."""
    assert process.stdout is not None
    lines = process.stdout.read().splitlines()
    assert process.wait(30) == 4
    with open_archive(folder) as reader:
        assert reader.check() == []
        assert reader.meta.state == "stopped"
        said = [int(line) for line in lines if line.isdigit()]
        assert reader.count == (said[-1] + 1 if said else reader.count)
    return lines[-1].split("|")


@pytest.mark.parametrize("name", SIGNALS)
def test_a_signal_stops_the_run_at_a_safe_point(name: str, tmp_path: Path) -> None:
    with running(tmp_path) as process:
        wait_for(process, "5")
        process.send_signal(getattr(signal, name))
        kind, cause, *bench = ended(process, tmp_path)
    assert (kind, cause) == ("StoppedError", f"stopped by {SIGNALS[name]}")
    assert bench == ["True", "{'gate': False, 'drain': False}", "[]", "()"]


def test_a_second_ctrl_c_does_not_wait_for_an_instrument_that_hangs(tmp_path: Path) -> None:
    with running(tmp_path, hang_at=3) as process:
        wait_for(process, "hanging")
        process.send_signal(signal.SIGINT)
        with pytest.raises(subprocess.TimeoutExpired):
            process.wait(0.3)
        process.send_signal(signal.SIGINT)
        kind, cause, *bench = ended(process, tmp_path)
    assert (kind, cause) == ("StoppedError", "stopped by Ctrl-C")
    assert bench == ["True", "{'gate': False, 'drain': False}", "[]", "()"]


def test_hammering_on_ctrl_c_does_not_keep_the_bench_from_being_made_safe(tmp_path: Path) -> None:
    with running(tmp_path) as process:
        wait_for(process, "5")
        for _ in range(20):
            process.send_signal(signal.SIGINT)
            time.sleep(0.002)
        kind, _, *bench = ended(process, tmp_path)
    assert kind == "StoppedError"
    assert bench == ["True", "{'gate': False, 'drain': False}", "[]", "()"]
