"""Exchange n fails, for every n, on the simulated bench over VISA: the world, which knows the truth, saw no harm."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import benchrun_sim
import pytest

from benchrun.acquire import Outcome, RehearsalPrompter, Silent, acquire, outcome_of
from benchrun.archive import ArchiveWriter, open_archive
from benchrun.bench import load_bench
from benchrun.drivers.open_bench import open_bench
from benchrun.drivers.registry import load_registry
from benchrun.errors import BenchrunError, UnsafeError
from benchrun.recipe import load_recipe
from benchrun.schedule.build import build_schedule
from benchrun.visa.session import Bus
from tests.acquire.fake_bench import meta

RECIPES = Path(__file__).parents[2] / "recipes"
RECIPE = f"""\
benchrun: 1
title: A little of everything
bench: {RECIPES / "balloon-driver.bench.yaml"}
receiver: {{if-bandwidth: 10 kHz, averages: 1}}
acquire:
  - bring-up: {{gate: -4.8 V, drain: 8 V}}
  - set: {{probe.level: 8 dBm}}
  - sweep: {{frequency: {{from: 2.2 GHz, to: 2.4 GHz, points: 2}}}}
    do:
      - set: {{probe.frequency: "{{frequency}}", pump.frequency: "{{frequency}} - 7 MHz", pump.level: -12 dBm}}
      - settle: 20 ms
      - read: {{name: hot, tones: [probe, pump, image], also: [drain.current, ambient.temperature]}}
  - connect: {{plane: output, what: meter}}
  - set: {{meter.frequency: 2.3 GHz, probe.frequency: 2.3 GHz}}
  - read: {{name: power, also: [meter.power]}}
"""
#: Faults that a run may meet; each ends it, or is overcome where it comes on the way down.
ONCE = (
    "no-answer",
    "lost-answer",
    "garbage",
    "half-block",
    "nan",
    "error-entry",
    "connection-reset",
    "reset-after",
    "power-cycle",
)


class Bench:
    """The simulated bench of one run."""

    def __init__(self, recipe: Path) -> None:
        self.registry = load_registry()
        bench, problems = load_bench(RECIPES / "balloon-driver.bench.yaml")
        assert bench is not None, problems
        self.bench = bench
        loaded, problems = load_recipe(recipe, bench, self.registry.steps)
        assert loaded is not None, problems
        self.schedule = build_schedule(loaded, bench, self.registry.steps)

    def run(self, folder: Path, plan: Callable[[Any], Any]) -> Story:
        """Open, let the faults begin, acquire, and look at what the world says."""
        rehearsal = benchrun_sim.open_in_process(self.bench.wiring(None), seed=1)
        story = Story(folder, rehearsal)
        writer = ArchiveWriter.create(folder, replace(meta(), readings_planned=len(self.schedule)))
        with Bus(rehearsal.visa_library) as bus:
            bench = open_bench(self.bench, self.registry, bus, rehearsal.clock, rehearsal.addresses)
            rehearsal.faults.restart()
            plan(rehearsal.faults)
            try:
                story.outcome = acquire(
                    self.schedule, bench, self.bench, self.registry.steps, writer, rehearsal.clock,
                    RehearsalPrompter(rehearsal.connect), Silent(),
                )  # fmt: skip
            except BaseException as error:
                story.error = error
                story.outcome = outcome_of(error)
            story.exchanges = rehearsal.faults.exchanges
            rehearsal.faults.clear()
            bench.close()
        writer.close(story.outcome.state if story.outcome else "failed")
        story.committed = writer.readings
        rehearsal.close()
        return story


class Story:
    """What became of one run."""

    def __init__(self, folder: Path, rehearsal: Any) -> None:
        self.folder = folder
        self.world = rehearsal.rack.world
        #: When the supply was cut off by itself: what that does to the device no software can keep from happening.
        self.power_cuts_ns: list[int] = []
        power_cycle = rehearsal.rack.power_cycle

        def cut(name: str) -> None:
            if name == "supply":
                self.power_cuts_ns.append(self.world.now_ns)
            power_cycle(name)

        rehearsal.rack.power_cycle = cut
        self.outcome: Outcome | None = None
        self.error: BaseException | None = None
        self.committed = 0
        self.exchanges = 0

    @property
    def radiating(self) -> set[str]:
        return {name for name in ("pump", "analyser") if self.world.source(name).on}

    def check(self) -> None:
        """Everything that must hold after any way out."""
        assert self.outcome is not None, self.error
        assert [one for one in self.world.damage if one.ns not in self.power_cuts_ns] == []
        assert self.error is None or isinstance(self.error, BenchrunError), repr(self.error)
        assert isinstance(self.error, UnsafeError) == bool(self.outcome.unconfirmed)
        gate, drain = self.world.supplies.bias("gate"), self.world.supplies.bias("drain")
        if not self.outcome.unconfirmed:
            assert not self.radiating
            assert not gate.on
            assert not drain.on
            assert drain.at(self.world.now_ns) < 1.0
        with open_archive(self.folder) as reader:
            assert reader.check() == []
            assert reader.count == self.committed
            assert reader.meta.state == self.outcome.state
            if self.error is not None and self.outcome.state != "stopped":
                assert reader.log("exchanges")
        if self.error is not None:
            assert f"{self.committed} of 3 readings are safe in" in str(self.error)


@pytest.fixture(scope="module")
def bench(tmp_path_factory: pytest.TempPathFactory) -> Bench:
    recipe = tmp_path_factory.mktemp("recipe") / "everything.recipe.yaml"
    recipe.write_text(RECIPE)
    return Bench(recipe)


def test_without_a_fault(bench: Bench, tmp_path: Path) -> None:
    story = bench.run(tmp_path / "run", lambda _faults: None)
    story.check()
    assert story.error is None
    assert story.committed == 3


@pytest.mark.parametrize("turn", [0, 4])
def test_exchange_n_fails_once_for_every_n(bench: Bench, turn: int, tmp_path: Path) -> None:
    """Kinds take turns, so that neighbouring exchanges meet different ones."""
    whole = bench.run(tmp_path / "whole", lambda _faults: None).exchanges
    assert whole > 50
    codes = set()
    for n in range(1, whole + 1):
        kind = ONCE[(n + turn) % len(ONCE)]
        story = bench.run(tmp_path / f"{n}-{kind}", lambda faults, n=n, kind=kind: faults.add(kind, at=n))  # type: ignore[misc]
        story.check()
        codes.add(getattr(story.error, "exit_code", 0))
    assert codes == {0, 5}


def dying(faults: Any, instrument: str, n: int) -> None:
    """Let an instrument say nothing any more from its exchange n on."""
    faults.add("no-answer", at=n, instrument=instrument, times=None)


@pytest.mark.parametrize("instrument", ["pump", "analyser", "supply", "meter", "ambient"])
def test_an_instrument_dies_at_its_exchange_n_for_every_n(bench: Bench, instrument: str, tmp_path: Path) -> None:
    n, codes = 0, []
    while True:
        n += 1
        story = bench.run(tmp_path / f"{n}", lambda faults, n=n: dying(faults, instrument, n))  # type: ignore[misc]
        story.check()
        codes.append(getattr(story.error, "exit_code", 0))
        if codes[-1] == 0:
            break
    assert set(codes) <= {0, 5, 6}
    assert (6 in codes) == (instrument in ("pump", "analyser", "supply"))
