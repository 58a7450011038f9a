"""Each fault that a bench can have, as a user meets it: the message, the exit code, and what became of the bench."""

from __future__ import annotations

import gc
import logging
import re
import socket
import warnings
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import benchrun_sim
import pytest
from benchrun_sim.in_process import InProcessRehearsal

from benchrun.bench import load_bench
from tests.cli.conftest import Ended
from tests.faults.flow.runs import READINGS, RECIPE, Story, story_of
from tests.faults.flow.worlds import Worlds, events, watch

Command = Callable[..., Ended]
BENCH = "balloon-driver.bench.yaml"
#: A recipe without operator and without bias, so that it runs where there is no terminal.
QUIET = """\
benchrun: 1
title: Quiet
bench: balloon-driver.bench.yaml
receiver: {if-bandwidth: 1 kHz, averages: 1}
acquire:
  - set: {probe.level: -10 dBm}
  - read: {name: cold, over: {frequency: {from: 2.2 GHz, to: 2.4 GHz, points: 5}}}
"""
CLOCK = r"\d\d:\d\d:\d\d  "
SAFE = r"Made safe: sources off, drain off \(0\.\d V read back\), gate released: confirmed\."


class Rehearsed:
    """Rehearses the small recipe with one fault, at the first exchange whose message begins with a text."""

    def __init__(self, command: Command, worlds: Worlds, recipes: Path) -> None:
        self.worlds, self._command, self._recipes = worlds, command, recipes
        (recipes / "small.recipe.yaml").write_text(RECIPE)
        said: list[tuple[str, str]] = []
        self.run("whole", lambda world: watch(world, said))
        self.said = said

    def run(self, name: str, arm: Callable[[InProcessRehearsal], object]) -> Story:
        self.worlds.arm = arm
        runs = self._recipes.parent / name
        ended = self._command("rehearse", self._recipes / "small.recipe.yaml", "--to", runs)
        return story_of(ended, self.worlds.last, runs)

    def fail(self, kind: str, instrument: str, text: str, **options: Any) -> Story:
        """Return what became of a run in which `instrument` fails at the first message that begins with `text`."""
        at = next(
            n for n, (name, message) in enumerate(self.said, 1) if name == instrument and message.startswith(text)
        )
        return self.run("run", lambda world: world.faults.add(kind, at=at, **options))  # type: ignore[arg-type]


@pytest.fixture
def rehearsed(benchrun_command: Command, worlds: Worlds, recipes: Path) -> Rehearsed:
    return Rehearsed(benchrun_command, worlds, recipes)


def require_told(story: Story, message: str, readings: int, code: int = 5) -> None:
    """The message and nothing else, the bench as it should be, and the readings before it there, once each."""
    assert story.ended.code == code, story.message
    safe = rf"{readings} of {READINGS} readings are safe in {re.escape(str(story.folder))}/archive\.sqlite\."
    resume = rf"(\n`benchrun resume {re.escape(str(story.folder))}` goes on with it\.)?"
    assert re.fullmatch(rf"{CLOCK}{message}\n{SAFE}\n{safe}{resume}", story.message), story.message
    story.require_harmless()
    with story.archive as archive:
        assert [reading.index for reading in archive.readings()] == list(range(readings))


PUMP = r"pump \(TCPIP0::192\.0\.2\.21::hislip0::INSTR\)"
ANALYSER = r"analyser \(TCPIP0::192\.0\.2\.22::hislip0::INSTR\)"
METER = r"meter \(TCPIP0::192\.0\.2\.23::hislip0::INSTR\)"
CABLE = r"Check that it is on, its cable, and that nobody else talks to it\."
SCREEN = r"Look at its own screen, and see that nobody else talks to it\."
DATA = r"'SENS:REC:DATA\?;:SYST:ERR\?'"


def test_an_entry_in_the_error_queue(rehearsed: Rehearsed) -> None:
    story = rehearsed.fail("error-entry", "pump", "SOUR:POW -12.", number=-222, detail="level")
    require_told(
        story,
        rf"""{PUMP}: reported -222,"Data out of range;level" after 'SOUR:POW -12\.\S+ DBM;[^']+'\. """
        r"It could not do that as it stands: look at its own screen, and at its limits in the bench file\.",
        2,
    )
    with story.archive as archive:
        assert archive.log("exchanges")[0].detail["instrument"] == "pump"


def test_a_header_that_the_instrument_does_not_know(rehearsed: Rehearsed) -> None:
    story = rehearsed.fail("error-entry", "meter", "READ", number=-113, detail="READ")
    require_told(
        story,
        rf"""{METER}: reported -113,"Undefined header;READ" after 'READ[^']*'\. """
        r"It did not understand: compare the dialect with its manual\.",
        4,
    )


def test_a_time_out(rehearsed: Rehearsed) -> None:
    story = rehearsed.fail("no-answer", "meter", "READ")
    require_told(story, rf"{METER}: did not answer 'READ[^']*' within \d+ s\. {CABLE}", 4)


def test_a_link_that_breaks(rehearsed: Rehearsed) -> None:
    story = rehearsed.fail("connection-reset", "analyser", "SENS:REC:DATA?")
    lost = r"The connection for the given session has been lost"
    require_told(story, rf"{ANALYSER}: the link broke at {DATA} \({lost}\)\. {CABLE}", 0)


@pytest.mark.parametrize("kind", ["half-block", "short-block"])
def test_a_block_that_is_shorter_than_its_header_says(rehearsed: Rehearsed, kind: str) -> None:
    story = rehearsed.fail(kind, "analyser", "SENS:REC:DATA?")
    short = r"the block's header says 96 bytes, (and fewer|\d+) arrived( before the deadline)?"
    require_told(story, rf"{ANALYSER}: answer to {DATA}: {short}\. {CABLE}", 0)


def test_a_block_of_the_wrong_length(rehearsed: Rehearsed) -> None:
    story = rehearsed.fail("wrong-length", "analyser", "SENS:REC:DATA?")
    wrong = r"the block's header says 88 bytes, 96 were expected"
    require_told(story, rf"{ANALYSER}: answer to {DATA}: {wrong}\. {CABLE}", 0)


def test_a_wave_that_is_not_a_number(rehearsed: Rehearsed) -> None:
    story = rehearsed.fail("nan", "analyser", "SENS:REC:DATA?")
    nan = r"number 7 of 12 is nan: the instrument has no value there"
    require_told(story, rf"{ANALYSER}: answer to {DATA}: {nan}\. {SCREEN}", 0)


def test_a_scalar_that_is_not_a_number(rehearsed: Rehearsed) -> None:
    story = rehearsed.fail("nan", "meter", "READ")
    nan = r"the reply '9\.91E\+37' means that there is no valid number \(nan\)"
    require_told(story, rf"{METER}: answer to 'READ[^']*': {nan}\. {SCREEN}", 4)


def test_garbage(rehearsed: Rehearsed) -> None:
    story = rehearsed.fail("garbage", "pump", "OUTP:STAT 1")
    require_told(story, rf"{PUMP}: the answer to 'OUTP:STAT 1;[^']*' is garbled: b'[^']+'\. {CABLE}", 0)


def test_an_overload_is_flagged_and_is_not_fatal(rehearsed: Rehearsed) -> None:
    def weaker(wiring: dict[str, Any]) -> None:
        wiring["instruments"]["analyser"]["receiver"]["linear_dbm"] = -25.0

    rehearsed.worlds.wired = weaker
    story = rehearsed.run("run", lambda _world: None)
    assert (story.ended.code, story.message) == (0, "")
    story.require_harmless()
    with story.archive as archive:
        flags = [set(reading.flags) for reading in archive.readings("hot")]
    assert len(flags) == 4
    assert all("over-limit:reflected" in each for each in flags)


def test_a_trip_ends_the_run_after_the_reading_that_saw_it(rehearsed: Rehearsed) -> None:
    """A supply that trips in the middle: the drain is off by itself, and the run does not go on without it."""
    at = next(n for n, (name, text) in enumerate(rehearsed.said, 1) if name == "analyser" and "REC:DATA?" in text)

    def arm(world: InProcessRehearsal) -> None:
        draw = world.faults.draw

        def tripping(instrument: str) -> object:
            if world.faults.exchanges == at:
                supply: Any = world.rack.instruments["supply"]
                supply._trip("current", 2)
            return draw(instrument)

        world.faults.draw = tripping  # type: ignore[method-assign,assignment]

    story = rehearsed.run("run", arm)
    assert story.ended.code == 5
    assert re.match(rf"{CLOCK}the protection of drain has tripped, seen with reading 0 'hot'\. ", story.message)
    story.require_harmless()
    with story.archive as archive:
        (reading,) = archive.readings()
    assert "tripped:drain" in reading.flags


# Another instrument, or none


def test_another_serial_than_the_bench_file_expects(
    benchrun_command: Command, worlds: Worlds, recipes: Path, tmp_path: Path
) -> None:
    path = recipes / BENCH
    path.write_text(path.read_text().replace(
        "    driver: power-meter\n", "    driver: power-meter\n    identity: {maker: Ostrelby, serial: '00001'}\n"
    ))  # fmt: skip
    (recipes / "quiet.recipe.yaml").write_text(QUIET)
    ended = benchrun_command("rehearse", recipes / "quiet.recipe.yaml", "--to", tmp_path / "runs")
    story = story_of(ended, worlds.last, tmp_path / "runs")
    assert re.fullmatch(
        rf"{METER}: the bench file expects serial '00001'; '\d+' answers \(Ostrelby Beck-1, serial \d+\)\. "
        r"Check the address, or correct the bench file\. "
        r"Nothing was switched on\. Confirmed off: RF of pump, RF of analyser, drain\.",
        story.message,
    )
    assert ended.code == 5
    story.require_harmless()
    assert [event for event in events(story.world) if " on " in event] == []


class Loopback:
    """A bench file that points at instruments on loopback, as one would write it for a real bench."""

    def __init__(self, recipes: Path, command: Command) -> None:
        self._path, self._command = recipes / BENCH, command
        (recipes / "quiet.recipe.yaml").write_text(QUIET)
        bench, problems = load_bench(self._path)
        assert bench is not None, problems
        self.served = benchrun_sim.serve(bench.wiring(None), seed=1)
        self._original = {name: one.address for name, one in bench.instruments.items()}

    def run(self, addresses: dict[str, str]) -> Ended:
        text = self._path.read_text()
        for name, address in self._original.items():
            text = text.replace(address, addresses[name])
        self._path.write_text(text)
        folder = self._path.parent
        return self._command("run", folder / "quiet.recipe.yaml", "--to", folder.parent / "runs")

    def require_dark(self) -> None:
        """Whatever radiated by itself after its power-up does not any more; nobody came to harm."""
        world = self.served.rack.world
        assert not any(world.source(name).on for name in self.served.rack.instruments)
        assert world.damage == []


@pytest.fixture
def loopback(recipes: Path, benchrun_command: Command) -> Iterator[Loopback]:
    bench = Loopback(recipes, benchrun_command)
    yield bench
    bench.served.close()


@pytest.fixture
def refused() -> Iterator[None]:
    """pyvisa-py leaves a socket that was refused to the garbage collector, which complains; log records hold it."""
    logging.disable()
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", ResourceWarning)
        yield
        gc.collect()
    logging.disable(logging.NOTSET)


def nobody() -> int:
    """Return a port of this machine at which nothing listens."""
    with socket.socket() as line:
        line.bind(("127.0.0.1", 0))
        return int(line.getsockname()[1])


@pytest.mark.parametrize(
    ("how", "address", "reason"),
    [
        ("sockets", "TCPIP0::127.0.0.1::{}::SOCKET", "Connection refused"),
        ("hislip", "TCPIP0::127.0.0.1::hislip0,{}::INSTR", "no connection"),
    ],
)
@pytest.mark.usefixtures("refused")
def test_nothing_listens(loopback: Loopback, how: str, address: str, reason: str) -> None:
    gone = address.format(nobody())
    ended = loopback.run({**getattr(loopback.served, how), "meter": gone})
    assert ended.code == 5
    assert ended.err == (
        f"Quiet\nmeter ({gone}): cannot be opened, nothing answers there ({reason}). "
        "Check that it is on, the cable, and the address. "
        "Nothing was switched on. Confirmed off: RF of pump, RF of analyser, drain.\n"
    )
    loopback.require_dark()


@pytest.mark.parametrize("address", ["TCPIP0::127.0.0.1::{}::SOCKET", "TCPIP0::127.0.0.1::hislip0,{}::INSTR"])
@pytest.mark.usefixtures("refused")
def test_nothing_to_identify(benchrun_command: Command, address: str) -> None:
    gone = address.format(nobody())
    ended = benchrun_command("identify", gone)
    assert (ended.code, ended.out) == (5, "")
    assert re.fullmatch(
        rf"instrument \({re.escape(gone)}\): cannot be opened, nothing answers there \([^)]+\)\. "
        r"Check that it is on, the cable, and the address\.?\n",
        ended.err,
    )


def test_another_kind_of_instrument(loopback: Loopback) -> None:
    addresses = dict(loopback.served.hislip)
    ended = loopback.run({**addresses, "meter": addresses["ambient"], "ambient": addresses["meter"]})
    assert ended.code == 5
    assert re.fullmatch(
        rf"Quiet\nmeter \({re.escape(addresses['ambient'])}\): Merrowby Mere-1 answers, and does not know '\w+', which "
        r"driver power-meter needs\. Check the address, the driver and the dialect in the bench file\. "
        r"Nothing was switched on\. Confirmed off: RF of pump, RF of analyser, drain\.\n",
        ended.err,
    )
    loopback.require_dark()


def test_the_real_thing_over_loopback(loopback: Loopback) -> None:
    """What the tests above break does work."""
    ended = loopback.run(dict(loopback.served.sockets))
    assert (ended.code, ended.err.splitlines()[0]) == (0, "Quiet")
    loopback.require_dark()
