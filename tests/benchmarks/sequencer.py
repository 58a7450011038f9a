"""What the sequencer costs: a run's CPU time against a bare loop's that says the same to the same instruments.

Both go over raw sockets to canned replies (each way's own, learned from the simulated instruments in a first run),
through the same drivers, and commit readings of the same kind. The bare loop is what one would write by hand for this
one recipe: no schedule, no state machine, no safe state, no flags but the receiver's. Time on the bench costs nothing.
"""

from __future__ import annotations

import gc
import itertools
import os
import pickle
import socket
import statistics
import subprocess
import sys
import tempfile
import threading
import time
from collections.abc import Iterator
from contextlib import contextmanager
from datetime import UTC, datetime
from pathlib import Path
from typing import Any, TypedDict

import benchrun_sim
import numpy as np

from benchrun.acquire import RefusingPrompter, Silent, acquire
from benchrun.archive import ArchiveWriter, Meta, open_archive
from benchrun.bench import Bench, load_bench
from benchrun.contract.capture import Capture
from benchrun.contract.reading import Reading
from benchrun.drivers.open_bench import OpenBench, open_bench
from benchrun.drivers.registry import load_registry
from benchrun.recipe import load_recipe
from benchrun.schedule.build import build_schedule
from benchrun.visa.session import Bus

RECIPES = Path(__file__).parents[2] / "recipes"
DRIVES_DBM, FREQUENCIES_HZ = np.linspace(14.0, 30.0, 17), np.linspace(2.2e9, 2.4e9, 81)
RECIPE = f"""\
benchrun: 1
title: Hot sweep
bench: {RECIPES / "balloon-driver.bench.yaml"}
receiver: {{if-bandwidth: 1 kHz, averages: 1}}
acquire:
  - set: {{probe.level: 8 dBm}}
  - sweep: {{drive: {{from: 14 dBm, to: 30 dBm, step: 1 dB}}}}
    do:
      - sweep: {{frequency: {{from: 2.2 GHz, to: 2.4 GHz, points: 81}}}}
        do:
          - set: {{probe.frequency: "{{frequency}}", pump.frequency: "{{frequency}} - 7 MHz"}}
          - settle: 20 ms
          - read: {{name: hot, tones: [probe, pump, image], also: [drain.voltage, drain.current, ambient.temperature]}}
"""
TONES, OFFSETS_HZ, WAVES = ("probe", "pump", "image"), (0.0, -7e6, -14e6), ("incident", "reflected")
WAYS = ("sequenced", "bare")
BOUND = 1.10
ROUNDS = 5
#: How many readings each way takes before the other goes on.
TURN = 3


#: The other end: each connection hears a story from its beginning.
REPLAY = """
import pickle, socket, sys, threading
def talk(line, story):
    line.setsockopt(socket.IPPROTO_TCP, socket.TCP_NODELAY, 1)
    with line, line.makefile("rb") as messages:
        for message, (expected, reply) in zip(messages, story):
            line.sendall(reply if message == expected else b"this was not said the first time\\n")
        messages.read()
def serve(listener, story):
    while True:
        threading.Thread(target=talk, args=(listener.accept()[0], story), daemon=True).start()
ports = {}
for way, stories in pickle.load(sys.stdin.buffer).items():
    for name, story in stories.items():
        listener = socket.create_server(("127.0.0.1", 0))
        ports.setdefault(way, {})[name] = listener.getsockname()[1]
        threading.Thread(target=serve, args=(listener, story), daemon=True).start()
pickle.dump(ports, sys.stdout.buffer)
sys.stdout.flush()
sys.stdin.read()
"""


class Figure(TypedDict):
    """One figure, its bound (at most), and whether it holds."""

    name: str
    figure: float
    bound: float
    holds: bool


def figures(rounds: int = ROUNDS) -> list[Figure]:
    """Return the figure of this topic."""
    with tempfile.TemporaryDirectory() as name, _stage(Path(name)) as stage:
        ratio = _ratio(stage, rounds)
    return [
        {
            "name": "the sequencer's CPU time, times that of a bare loop that says and commits the same",
            "figure": round(ratio, 3),
            "bound": BOUND,
            "holds": ratio <= BOUND,
        }
    ]


class FreeClock:
    """A real bench's clock, on which waiting costs nothing."""

    virtual = False

    def __init__(self) -> None:
        self.ns = 0

    def now_ns(self) -> int:
        return self.ns

    def sleep(self, duration_s: float) -> None:
        self.ns += round(duration_s * 1e9)

    def align(self, start_ns: int) -> None:
        """Nothing can be moved."""


class Learner:
    """A raw socket in front of one simulated instrument that writes down what is said and answered."""

    def __init__(self, library: Any, handle: Any) -> None:
        self.story: list[tuple[bytes, bytes]] = []
        self._library, self._handle = library, handle
        self._listener = socket.create_server(("127.0.0.1", 0))
        self.port: int = self._listener.getsockname()[1]
        threading.Thread(target=self._talk, daemon=True).start()

    def _talk(self) -> None:
        line, _ = self._listener.accept()
        with self._listener, line, line.makefile("rb") as messages:
            for message in messages:
                self._library.write(self._handle, message)
                self.story.append((message, bytes(self._library.read(self._handle, 1 << 20)[0])))
                line.sendall(self.story[-1][1])


class Baton:
    """Lets two threads take turns, so that both ways meet the same machine, busy or not."""

    def __init__(self) -> None:
        self._changed = threading.Condition()
        self._running = list(WAYS)

    def wait(self, way: str) -> None:
        """Wait for this way's turn."""
        with self._changed:
            self._changed.wait_for(lambda: self._running[0] == way)

    def hand_on(self, way: str) -> None:
        """Let the other way go on, and wait for the next turn."""
        with self._changed:
            self._running.append(self._running.pop(0))
            self._changed.notify_all()
        self.wait(way)

    def leave(self, way: str) -> None:
        """Take no more turns."""
        with self._changed:
            self._running.remove(way)
            self._changed.notify_all()


class Stage:
    """Bench, schedule and canned instruments, and the two ways to take the same readings."""

    def __init__(self, folder: Path, bench: Bench) -> None:
        self._folders = (folder / f"{n}" for n in itertools.count())
        self._registry = load_registry()
        self._bench = bench
        self.wiring = bench.wiring(None)
        self._clock = FreeClock()
        self.baton: Baton | None = None
        #: Where each way finds its instruments: ports by name.
        self.ports: dict[str, dict[str, int]] = {}
        (folder / "hot.recipe.yaml").write_text(RECIPE)
        recipe, problems = load_recipe(folder / "hot.recipe.yaml", bench, self._registry.steps)
        assert recipe is not None, problems
        self.schedule = build_schedule(recipe, bench, self._registry.steps)

    @contextmanager
    def _opened(self, way: str) -> Iterator[OpenBench]:
        """Open the bench for one way, so that nothing is known from the way before."""
        addresses = {name: f"TCPIP0::127.0.0.1::{port}::SOCKET" for name, port in self.ports[way].items()}
        with Bus("py") as bus:
            yield open_bench(self._bench, self._registry, bus, self._clock, addresses)

    def sequenced(self) -> tuple[float, Path]:
        """Take all readings by the product; return the CPU time (s) and the run's folder."""
        with self._opened("sequenced") as bench, self._writer("sequenced") as writer:
            begin_s = time.thread_time()
            acquire(
                self.schedule,
                bench,
                self._bench,
                self._registry.steps,
                writer,
                self._clock,
                RefusingPrompter(),
                Silent(),
            )
            return time.thread_time() - begin_s, writer.path.parent

    def bare(self) -> tuple[float, Path]:
        """Take all readings by hand; return the CPU time (s) and the run's folder."""
        rows = range(0, len(self.schedule), len(FREQUENCIES_HZ))
        levels_dbm = [self.schedule.reading(index).conditions["pump.level_dbm"] for index in rows]
        with self._opened("bare") as bench, self._writer("bare") as writer:
            begin_s = time.thread_time()
            bench.prepare()
            bench.set("probe.level", 8.0)
            for k, level_dbm in enumerate(levels_dbm):
                self._bare_row(bench, writer, k, float(level_dbm))
            for name in ("pump", "probe"):
                bench.signal(name).output(False)
            return time.thread_time() - begin_s, writer.path.parent

    def _bare_row(self, bench: OpenBench, writer: ArchiveWriter, row: int, level_dbm: float) -> None:
        clock = self._clock
        pump, receiver = bench.signal("pump"), bench.receiver
        for n, hz in enumerate(FREQUENCIES_HZ.tolist()):
            if row or n:
                receiver.output(False)
                pump.output(False)
            bench.set("probe.frequency", hz)
            bench.set("pump.frequency", hz - 7e6)
            if not n:
                bench.set("pump.level", level_dbm)
            receiver.configure(Capture(WAVES, TONES, OFFSETS_HZ, (hz,), 1e3))
            receiver.output(True)
            pump.output(True)
            clock.sleep(0.02)
            receiver.locked()
            pump.locked()
            started_ns = clock.now_ns()
            found = receiver.acquire()
            scalars = {
                "drain.voltage_v": bench.read("drain.voltage"),
                "drain.current_a": bench.read("drain.current"),
                "ambient.temperature_degc": bench.read("ambient.temperature"),
            }
            conditions: dict[str, float | str] = {
                "probe.level_dbm": 8.0, "drive_dbm": float(DRIVES_DBM[row]),
                "frequency_hz": hz, "probe.frequency_hz": hz, "pump.frequency_hz": hz - 7e6,
                "pump.level_dbm": level_dbm,
            }  # fmt: skip
            flags = tuple(f"over-limit:{name}" for name, over in zip(WAVES, found.over_limit, strict=True) if over)
            writer.commit(
                Reading(
                    row * len(FREQUENCIES_HZ) + n, "hot", 0, conditions, (hz,), TONES, OFFSETS_HZ, WAVES,
                    found.data, found.coherent, scalars, flags, started_ns, clock.now_ns(),
                    datetime.now(UTC).isoformat(),
                )
            )  # fmt: skip

    def _writer(self, way: str) -> ArchiveWriter:
        """Return a new archive; while there is a baton, the turn changes with every TURN readings."""
        meta = Meta("", "", "", "", {}, "", len(self.schedule), "simulated:1")
        writer = ArchiveWriter.create(next(self._folders), meta)
        commit, baton = writer.commit, self.baton
        if baton is not None:

            def commit_in_turn(reading: Reading) -> None:
                commit(reading)
                if writer.readings % TURN == 0:
                    baton.hand_on(way)

            writer.commit = commit_in_turn  # type: ignore[method-assign]
        return writer


@contextmanager
def _stage(folder: Path) -> Iterator[Stage]:
    """Learn both ways, and let a process of its own replay them."""
    bench, problems = load_bench(RECIPES / "balloon-driver.bench.yaml")
    assert bench is not None, problems
    stage = Stage(folder, bench)
    stories = {way: _learned(stage, way) for way in WAYS}
    said = {way: sum(map(len, stories[way].values())) for way in WAYS}
    assert said["bare"] <= said["sequenced"], said  # or the ratio would mean nothing
    with subprocess.Popen([sys.executable, "-c", REPLAY], stdin=subprocess.PIPE, stdout=subprocess.PIPE) as process:
        assert process.stdin is not None
        assert process.stdout is not None
        pickle.dump(stories, process.stdin)
        process.stdin.flush()
        stage.ports = pickle.load(process.stdout)
        try:
            yield stage
        finally:
            process.kill()


def _learned(stage: Stage, way: str) -> dict[str, list[tuple[bytes, bytes]]]:
    """Go one way on the simulated bench and return what was said to each instrument, and what it answered."""
    rehearsal: Any = benchrun_sim.open_in_process(stage.wiring, seed=1)
    library = rehearsal.visa_library
    manager = library.open_default_resource_manager()[0]
    learners = {name: Learner(library, library.open(manager, at)[0]) for name, at in rehearsal.addresses.items()}
    stage.ports[way] = {name: learner.port for name, learner in learners.items()}
    getattr(stage, way)()
    return {name: learner.story for name, learner in learners.items()}


def _ratio(stage: Stage, rounds: int) -> float:
    """Return the median of the ratios of CPU times over rounds in which both ways are gone at once, in turns."""
    _require_alike(stage)
    gc.collect()
    gc.freeze()  # what the learning has made is no burden of either way
    with _one_core():
        ratios = [_round(stage) for _ in range(rounds)]
    gc.unfreeze()
    return statistics.median(ratios)


@contextmanager
def _one_core() -> Iterator[None]:
    """Keep both ways on one core where the system lets us: two may run at different speeds."""
    if not hasattr(os, "sched_setaffinity"):
        yield
        return
    cores = os.sched_getaffinity(0)
    os.sched_setaffinity(0, {max(cores)})
    try:
        yield
    finally:
        os.sched_setaffinity(0, cores)


def _round(stage: Stage) -> float:
    stage.baton = baton = Baton()
    times: dict[str, float] = {}

    def go(way: str) -> None:
        baton.wait(way)
        try:
            times[way], _ = getattr(stage, way)()
        finally:
            baton.leave(way)

    threads = [threading.Thread(target=go, args=(way,)) for way in WAYS]
    for thread in threads:
        thread.start()
    for thread in threads:
        thread.join()
    stage.baton = None
    return times["sequenced"] / times["bare"]


def _require_alike(stage: Stage) -> None:
    """Both ways must commit alike."""
    (_, sequenced), (_, bare) = stage.sequenced(), stage.bare()
    with open_archive(sequenced) as one, open_archive(bare) as other:
        first, second = one.stack("hot"), other.stack("hot")
    assert first.data.shape == second.data.shape
    assert first.conditions.keys() == second.conditions.keys()
    assert all(np.array_equal(first.conditions[key], second.conditions[key]) for key in first.conditions)
    assert first.scalars.keys() == second.scalars.keys()


if __name__ == "__main__":
    for figure in figures():
        print(figure)
