"""Exchange n goes wrong, for every n, from opening the bench to its end: nobody comes to harm, and the message helps.

All n and all kinds take minutes: BENCHRUN_EVERY_EXCHANGE=1 does them; without it every few n are tried.
"""

from __future__ import annotations

import os
import re
import signal
from collections.abc import Callable
from pathlib import Path
from typing import NamedTuple

import pytest
from benchrun_sim.faults import Fault
from benchrun_sim.in_process import InProcessRehearsal

from tests.cli.conftest import Ended
from tests.faults.flow.runs import READINGS, RECIPE, Story, story_of
from tests.faults.flow.worlds import Worlds, events

EVERY = bool(os.environ.get("BENCHRUN_EVERY_EXCHANGE"))
KINDS = ("no-answer", "garbage", "error-entry", "connection-reset", "half-block", "nan")
#: More than the exchanges of the recipe; those beyond its end do nothing.
MOST = 330
#: Sampled exchanges: each with one kind in turn, so that all kinds go through all parts of a run.
STRIDE = 5
SAMPLE = [
    (n, kind)
    for n in range(1, MOST, 1 if EVERY else STRIDE)
    for kind in (KINDS if EVERY else (KINDS[n // STRIDE % 6],))
]


class Hit(NamedTuple):
    """What a fault hit: the instrument, and what had happened in the world by then."""

    instrument: str
    happened: tuple[str, ...]


class Bench:
    """Rehearses the recipe with faults, and remembers what they hit."""

    def __init__(self, command: Callable[..., Ended], worlds: Worlds, recipes: Path) -> None:
        self._command, self._worlds, self._recipes = command, worlds, recipes
        self.hits: list[Hit] = []
        (recipes / "small.recipe.yaml").write_text(RECIPE)

    def run(self, name: str, plan: Callable[[InProcessRehearsal], object]) -> Story:
        def arm(world: InProcessRehearsal) -> None:
            plan(world)
            draw = world.faults.draw

            def watched(instrument: str) -> Fault | None:
                fault = draw(instrument)
                if fault is not None:
                    self.hits.append(Hit(instrument, tuple(events(world))))
                return fault

            world.faults.draw = watched  # type: ignore[method-assign]

        self._worlds.arm = arm
        runs = self._recipes.parent / name
        ended = self._command("rehearse", self._recipes / "small.recipe.yaml", "--to", runs)
        return story_of(ended, self._worlds.last, runs)


@pytest.fixture
def bench(benchrun_command: Callable[..., Ended], worlds: Worlds, recipes: Path) -> Bench:
    return Bench(benchrun_command, worlds, recipes)


def test_the_recipe_has_every_kind_of_step_and_a_few_hundred_exchanges(bench: Bench) -> None:
    story = bench.run("whole", lambda _world: None)
    assert (story.ended.code, story.message) == (0, "")
    story.require_harmless()
    with story.archive as archive:
        assert archive.count == READINGS
    assert 200 < story.world.faults.exchanges < MOST
    happened = events(story.world)
    for part in ("connect output device", "gate on", "drain set 28", "rf-on pump", "level pump", "connect input meter"):
        assert any(event.startswith(part) for event in happened), part


@pytest.mark.parametrize(("n", "kind"), SAMPLE)
def test_one_exchange_goes_wrong(bench: Bench, n: int, kind: str) -> None:
    story = bench.run("run", lambda world: world.faults.add(kind, at=n))  # type: ignore[arg-type]
    story.require_harmless()
    assert story.ended.code in (0, 5), story.message
    if story.ended.code == 0:
        require_overcome(story, bench, kind)
    else:
        require_told(story, bench.hits[0])


def require_overcome(story: Story, bench: Bench, kind: str) -> None:
    """A fault that did not end the run: everything was read all the same, and it hit where a second try is allowed.

    That is before the device is up, and from there on where something is switched off; or the answer held no number.
    """
    assert story.message == ""
    with story.archive as archive:
        assert archive.count == READINGS
    if bench.hits and kind not in ("nan", "error-entry"):
        happened = bench.hits[0].happened
        down = happened[-1].startswith(("rf-off", "drain off", "connect", "gate off")) if happened else True
        assert down or not any(event.startswith("gate on") for event in happened)


def require_told(story: Story, hit: Hit) -> None:
    """One message: the instrument first, then the exchange, what to do, and how the bench was left."""
    first, *rest = story.message.splitlines()
    told = re.fullmatch(rf"(?:\d\d:\d\d:\d\d  )?{hit.instrument} \(TCPIP0::[^)]+\): (.+)\.", first, re.IGNORECASE)
    assert told is not None, first
    exchange = re.search(r"'([^']+)'", told[1])
    assert exchange is not None, first
    assert re.search(r"\. (Check|Look|It could not|It did not|Questions|Its manual)", told[1]), first
    if not rest:
        assert re.search(r"Nothing was switched on\. Confirmed off: .*\bdrain$", told[1]), first
        assert not any(event.startswith(("rf-on pump", "drain on", "gate on")) for event in events(story.world))
        return
    assert rest[0].startswith("Made safe: sources off, drain off ("), rest
    assert re.fullmatch(r"\d of 5 readings are safe in .+", rest[1]), rest
    assert rest[2:] in ([], [f"`benchrun resume {story.folder}` goes on with it."]), rest
    with story.archive as archive:
        said = [event.detail for event in archive.log("exchanges")]
        assert [detail["instrument"] for detail in said] == [hit.instrument]
        assert exchange[1] in [each["sent"] for each in said[0]["exchanges"]]
        assert told[1].split(". ")[0][-40:] in archive.log("failure")[0].text


@pytest.mark.parametrize("n", range(1, 60, 1 if EVERY else 9))
@pytest.mark.parametrize("instrument", ["pump", "analyser", "supply"])
def test_an_instrument_dies_for_good(bench: Bench, instrument: str, n: int) -> None:
    """What can still be switched off is off, the gate holds where something is not confirmed, and that is said."""
    story = bench.run("run", lambda world: world.faults.add("no-answer", at=n, instrument=instrument, times=None))
    story.require_archive()
    world = story.world.rack.world
    assert world.damage == []
    others = {"pump", "analyser"} - {instrument}
    assert not any(world.source(name).on for name in others)
    drain, gate = world.supplies.bias("drain"), world.supplies.bias("gate")
    if instrument != "supply":
        assert not drain.on
    assert gate.on or drain.at(world.now_ns) < 1.0
    if story.ended.code == 6:
        name = {"pump": "PUMP", "analyser": "PROBE", "supply": "DRAIN"}[instrument]
        assert f"{name} NOT CONFIRMED" in story.message
        assert (
            "Check it before you touch the bench. By hand: RF off first, then the drain, the gate last."
            in story.message
        )
        assert "gate released" not in story.message
    else:
        assert story.ended.code in (0, 5)
        assert "Nothing was switched on." in story.message or story.ended.code == 0


@pytest.mark.skipif(os.name != "posix", reason="POSIX signals")
@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM])
@pytest.mark.parametrize("n", range(1, MOST, 1 if EVERY else 23))
def test_a_signal_at_exchange_n(bench: Bench, n: int, number: int) -> None:
    """A signal that comes while an exchange is under way: the run stops at a safe point, or has ended already."""

    def plan(world: InProcessRehearsal) -> None:
        draw = world.faults.draw

        def interrupted(instrument: str) -> Fault | None:
            fault = draw(instrument)
            if world.faults.exchanges == n:
                os.kill(os.getpid(), number)
            return fault

        world.faults.draw = interrupted  # type: ignore[method-assign]

    story = bench.run("run", plan)
    story.require_harmless()
    if story.ended.code == 0:
        with story.archive as archive:
            assert archive.count == READINGS
        return
    assert story.ended.code == 4, story.message
    first, *rest = story.message.strip().splitlines()
    name = "Ctrl-C" if number == signal.SIGINT else "SIGTERM"
    if rest:
        assert re.fullmatch(rf"\d\d:\d\d:\d\d  stopped by {name}\.", first), story.message
        assert rest[0].startswith("Made safe: sources off, drain off (")
    elif "bring-down sources off" in story.ended.err:  # everything was read: only the links were not closed yet
        assert first == "Stopped."
    else:
        assert first.startswith("Stopped while the bench was opened. Nothing was switched on. Confirmed off: RF of ")
