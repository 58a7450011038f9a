"""Bad input as a user meets it: one message with its place, exit 2, and no instrument was ever spoken to."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import NamedTuple

import pytest
import pyvisa

from tests.cli.conftest import Ended
from tests.faults.flow.conftest import recipes, worlds
from tests.faults.flow.worlds import Worlds

__all__ = ["recipes", "worlds"]

HOT = "hot-output-match.recipe.yaml"
CALIBRATE = "calibrate-output-plane.recipe.yaml"
BENCH = "balloon-driver.bench.yaml"
KIT = "field-kit.kit.yaml"
DIALECT = "simulated-wave-receiver.dialect.yaml"
NOTHING = "1 mistake. Nothing was switched on.\n"
Command = Callable[..., Ended]


class Mistake(NamedTuple):
    """A demo file with `old` written as `new`; the message is told at the place of `at` (of `new` where that is "")."""

    file: str
    old: str
    new: str
    message: str
    at: str = ""
    recipe: str = HOT

    def make(self, folder: Path) -> str:
        """Write the mistake into its file, and return the place at which it is told."""
        path = folder / self.file
        text = path.read_text(encoding="utf-8")
        assert text.count(self.old) >= 1, f"{self.file} has no {self.old}"
        begin = text.index(self.old)
        spoilt = text.replace(self.old, self.new, 1)
        path.write_text(spoilt, encoding="utf-8")
        place = spoilt.find(self.at or self.new, begin)
        if place < 0:
            place = spoilt.rindex(self.at, 0, begin)
        line = spoilt.count("\n", 0, place) + 1
        return f"{path}:{line}:{place - spoilt.rfind(chr(10), 0, place)}"


@pytest.fixture(autouse=True)
def no_visa(monkeypatch: pytest.MonkeyPatch) -> None:
    """A resource manager that is made at all is a failure: nothing may be opened for input that is wrong."""

    def refuse(*_: object, **__: object) -> None:
        raise AssertionError("a VISA library was opened")

    monkeypatch.setattr(pyvisa, "ResourceManager", refuse)


NUMBERS = [
    Mistake(
        HOT,
        "from: 2.2 GHz",
        "from: 3,5 GHz",
        "'3,5 GHz' is not a quantity: the decimal mark is a point. Did you mean 3.5 GHz?",
        "3,5",
    ),
    Mistake(HOT, "from: 2.2 GHz", "from: 2.9 Ghz", "'2.9 Ghz': there is no unit Ghz. Did you mean 2.9 GHz?", "2.9"),
    Mistake(
        HOT,
        "from: 2.2 GHz",
        "from: 1e999 Hz",
        "'1e999 Hz' is beyond any number that can be carried; check the exponent.",
        "1e999",
    ),
    Mistake(HOT, "from: 2.2 GHz", "from: nan GHz", "'nan GHz' is not a finite number.", "nan"),
    Mistake(
        HOT, "from: 2.2 GHz", "from: 2.2", "'2.2' has no unit: a frequency is written with one, like 2.9 GHz.", "2.2"
    ),
    Mistake(HOT, "from: 2.2 GHz", "from: ", "a quantity is missing here; it is written like 2.9 GHz.", "from"),
    Mistake(
        HOT,
        "from: 2.2 GHz",
        "from: 2,200 MHz",
        "'2,200 MHz' could be 2.200 MHz or 2200 MHz: the decimal mark is a point, and there are no thousands marks. "
        "Write which.",
        "2,200",
    ),
    Mistake(
        HOT,
        "probe.level: 8 dBm",
        "probe.level: 10 min",
        "'10 min' is a time, where a level is expected, like -10 dBm.",
        "10 min",
    ),
    Mistake(
        HOT, "from: 14 dBm", "from: 10 min", "'10 min' is a time, where a level is expected, like -10 dBm.", "10 min"
    ),
    Mistake(
        HOT, "probe.level: 8 dBm", "probe.level: 8", "'8' has no unit: a level is written with one, like -10 dBm.", "8}"
    ),
    Mistake(HOT, "step: 1 dB", "step: 1 dBm", "'1 dBm' is a level, where a ratio is expected, like 20 dB.", "1 dBm"),
    Mistake(HOT, "step: 1 dB", "step: 0 dB", "'0 dB': a step is written without a sign, and is not 0.", "0 dB"),
    Mistake(
        HOT, "settle: 20 ms", "settle: 20 dBm", "'20 dBm' is a level, where a time is expected, like 20 ms.", "20 dBm"
    ),
    Mistake(
        BENCH,
        "ceiling: 5 dBm",
        "ceiling: 5,0 dBm",
        "'5,0 dBm' is not a quantity: the decimal mark is a point. Did you mean 5.0 dBm?",
        "5,0",
    ),
    Mistake(
        KIT, "delay: 30 ps", "delay: 30 pS", "'30 pS': the unit is written ps. Did you mean 30 ps?", "30 pS", CALIBRATE
    ),
    Mistake(
        DIALECT,
        "point: 0.2 ms",
        "point: 0.2 MHz",
        "'0.2 MHz' is a frequency, where a time is expected, like 20 ms.",
        "0.2 MHz",
    ),
]

NAMES = [
    Mistake(HOT, "averages: 1", "avrages: 1", "'avrages' is not known here. Did you mean 'averages'?"),
    Mistake(HOT, "calibrations:", "calibratons:", "'calibratons' is not known here. Did you mean 'calibrations'?"),
    Mistake(BENCH, "ceiling: 5 dBm", "cieling: 5 dBm", "'cieling' is not known here. Did you mean 'ceiling'?"),
    Mistake(
        KIT,
        "impedance: 50 ohm",
        "impedence: 50 ohm",
        "'impedence' is not known here. Did you mean 'impedance'?",
        "",
        CALIBRATE,
    ),
    Mistake(DIALECT, "options: true", "option: true", "'option' is not known here. Did you mean 'options'?"),
    Mistake(
        HOT,
        "settle: 20 ms",
        "setle: 20 ms",
        "there is no step 'setle'. Did you mean 'settle'? There is: sweep, ask, bring-up, connect, read, set, settle.",
    ),
    Mistake(
        BENCH,
        "driver: thermometer",
        "driver: thermometr",
        "no installed driver is called 'thermometr'. Did you mean 'thermometer'? "
        "Installed: dc-supply, power-meter, signal-source, thermometer, wave-receiver.",
        "thermometr",
    ),
    Mistake(
        HOT,
        "calibration: output-plane}",
        "calibration: output-plan}",
        "there is no calibration 'output-plan'. Did you mean 'output-plane'? There is: output-plane, drive. "
        "Name the recipe that makes it under `calibrations`.",
        "output-plan}",
    ),
    Mistake(
        HOT,
        '"{frequency} - 7 MHz"',
        '"{freqency} - 7 MHz"',
        "'{freqency}' refers to nothing here. What is swept around it: {drive}, {frequency}.",
    ),
    Mistake(
        BENCH,
        "address: TCPIP0::192.0.2.21::hislip0::INSTR",
        "address: TCPIP0:192.0.2.21",
        "'TCPIP0:192.0.2.21' is not a VISA address; it is written like TCPIP0::192.0.2.21::hislip0::INSTR.",
        "TCPIP0:",
    ),
]

SETTABLE = (
    "pump.level, probe.level, pump.frequency, probe.frequency, gate.voltage, gate.current-limit, drain.voltage, "
    "drain.current-limit, meter.frequency, drive"
)
SWEEPS = [
    Mistake(
        HOT, "drive: {from", "pmup.level: {from", f"nothing on the bench is called 'pmup.level'. It has {SETTABLE}."
    ),
    Mistake(
        HOT,
        "drive: {from",
        "meter.power: {from",
        "'meter.power' can be read, not set. What can be set: pump.frequency, pump.level, probe.frequency, "
        "probe.level, gate.voltage, gate.current-limit, drain.voltage, drain.current-limit, meter.frequency, drive.",
    ),
    Mistake(
        HOT,
        "drain: 28 V",
        "drain: 48 V",
        "drain.voltage would be 48 V; the bench file allows 0 V to 30 V (limits and ceiling). "
        "Change the recipe, or the bench file if the instrument can do it.",
        "bring-up",
    ),
]

FILES = [
    Mistake(
        HOT,
        "bench: balloon-driver",
        "bench: baloon-driver",
        "there is no file 'baloon-driver.bench.yaml'. Did you mean 'balloon-driver.bench.yaml'?",
        "baloon",
    ),
    Mistake(
        CALIBRATE,
        "kit: field-kit",
        "kit: feld-kit",
        "there is no file 'feld-kit.kit.yaml'. Did you mean 'field-kit.kit.yaml'?",
        "feld",
        CALIBRATE,
    ),
    Mistake(
        HOT,
        "output-plane: calibrate-",
        "output-plane: clibrate-",
        "there is no file 'clibrate-output-plane.recipe.yaml'. Did you mean 'calibrate-output-plane.recipe.yaml'?",
        "clibrate",
    ),
    Mistake(
        BENCH,
        "dialect: simulated-",
        "dialect: another-",
        "there is no file 'another-wave-receiver.dialect.yaml'; names are taken from the folder of this file.",
        "another",
    ),
    Mistake(HOT, "title: Hot", 'title: "Hot', "this is not YAML: expected <block end>, but found '<scalar>'."),
]


def told(mistakes: list[Mistake]) -> pytest.MarkDecorator:
    return pytest.mark.parametrize(
        "mistake", mistakes, ids=[f"{one.file.split('.')[-2]}-{one.new}" for one in mistakes]
    )


def require_refused(ended: Ended, worlds: Worlds, message: str) -> None:
    """One message and nothing else, wrong input, and not one world was built."""
    assert ended.err == message
    assert (ended.code, ended.out) == (2, "")
    assert worlds.opened == []


@told(NUMBERS + NAMES + SWEEPS + FILES[:-1])
def test_a_mistake_in_a_file_is_told_once_at_its_place(
    benchrun_command: Command, recipes: Path, worlds: Worlds, tmp_path: Path, mistake: Mistake
) -> None:
    place = mistake.make(recipes)
    ended = benchrun_command("rehearse", recipes / mistake.recipe, "--to", tmp_path / "runs")
    require_refused(ended, worlds, f"{place}: {mistake.message}\n{NOTHING}")
    assert not (tmp_path / "runs").exists()


@told(NUMBERS + NAMES + SWEEPS + FILES[:-1])
def test_check_tells_the_same_as_its_result(benchrun_command: Command, recipes: Path, mistake: Mistake) -> None:
    place = mistake.make(recipes)
    ended = benchrun_command("check", recipes / mistake.recipe)
    assert (ended.code, ended.out, ended.err) == (2, f"{place}: {mistake.message}\n{NOTHING}", "")


@pytest.mark.parametrize("command", ["levels", "run"])
def test_every_command_that_reads_a_recipe_refuses_it(
    benchrun_command: Command, recipes: Path, worlds: Worlds, tmp_path: Path, command: str
) -> None:
    place = NUMBERS[0].make(recipes)
    to = ["--to", tmp_path / "runs"] if command == "run" else []
    ended = benchrun_command(command, recipes / HOT, *to)
    require_refused(ended, worlds, f"{place}: {NUMBERS[0].message}\n{NOTHING}")


def test_all_mistakes_of_all_files_come_at_once_in_order(
    benchrun_command: Command, recipes: Path, worlds: Worlds, tmp_path: Path
) -> None:
    made = [(one.make(recipes), one.message) for one in (NAMES[2], NUMBERS[0], NUMBERS[12])]
    ended = benchrun_command("rehearse", recipes / HOT, "--to", tmp_path / "runs")
    lines = sorted(
        (f"{place}: {message}" for place, message in made),
        key=lambda line: (line.split(":")[0], int(line.split(":")[1])),
    )
    require_refused(ended, worlds, "\n".join(lines) + "\n3 mistakes. Nothing was switched on.\n")


# Files that cannot be read


def test_a_recipe_that_is_not_there(benchrun_command: Command, recipes: Path, worlds: Worlds, tmp_path: Path) -> None:
    path = recipes / "nowhere.recipe.yaml"
    ended = benchrun_command("rehearse", path, "--to", tmp_path / "runs")
    require_refused(ended, worlds, f"{path}: there is no such file. Check the name and the folder.\n{NOTHING}")


def test_a_bench_on_the_command_line_that_is_not_there(
    benchrun_command: Command, recipes: Path, worlds: Worlds, tmp_path: Path
) -> None:
    path = recipes / "nowhere.bench.yaml"
    ended = benchrun_command("rehearse", recipes / HOT, "--bench", path, "--to", tmp_path / "runs")
    require_refused(ended, worlds, f"{path}: there is no such file. Check the name and the folder.\n{NOTHING}")


@pytest.mark.parametrize("file", [HOT, BENCH])
def test_a_file_that_is_no_text(
    benchrun_command: Command, recipes: Path, worlds: Worlds, tmp_path: Path, file: str
) -> None:
    path = recipes / file
    path.write_bytes(b"benchrun: 1\ntitle: \xff\xfe\n")
    ended = benchrun_command("rehearse", recipes / HOT, "--to", tmp_path / "runs")
    require_refused(ended, worlds, f"{path}: is not UTF-8 text (byte 19). Save it as UTF-8.\n{NOTHING}")


def test_a_folder_where_a_file_should_be(
    benchrun_command: Command, recipes: Path, worlds: Worlds, tmp_path: Path
) -> None:
    path = recipes / BENCH
    path.unlink()
    path.mkdir()
    ended = benchrun_command("rehearse", recipes / HOT, "--to", tmp_path / "runs")
    require_refused(ended, worlds, f"{path}: is a folder, not a file.\n{NOTHING}")


def test_a_file_that_may_not_be_read(
    benchrun_command: Command, recipes: Path, worlds: Worlds, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    path, read = recipes / BENCH, Path.read_bytes

    def denied(self: Path) -> bytes:  # as root, permissions stop nobody
        if self == path:
            raise PermissionError(13, "Permission denied")
        return read(self)

    monkeypatch.setattr(Path, "read_bytes", denied)
    ended = benchrun_command("rehearse", recipes / HOT, "--to", tmp_path / "runs")
    require_refused(ended, worlds, f"{path}: cannot be read (Permission denied).\n{NOTHING}")


def test_a_file_that_is_not_yaml(benchrun_command: Command, recipes: Path, worlds: Worlds, tmp_path: Path) -> None:
    FILES[-1].make(recipes)
    ended = benchrun_command("rehearse", recipes / HOT, "--to", tmp_path / "runs")
    assert f"{recipes / HOT}:" in ended.err
    assert "this is not YAML" in ended.err
    require_refused(ended, worlds, f"{ended.err.splitlines()[0]}\n{NOTHING}")


def test_a_calibration_that_only_this_recipe_would_make(
    benchrun_command: Command, recipes: Path, worlds: Worlds, tmp_path: Path
) -> None:
    Mistake(HOT, "output-plane: calibrate-output-plane.recipe.yaml", f"output-plane: {HOT}", "").make(recipes)
    ended = benchrun_command("rehearse", recipes / HOT, "--to", tmp_path / "runs")
    assert ended.code == 2
    assert (
        f"this recipe wants a calibration that only it would make: {HOT} wants {HOT}. Name the recipe that calibrates."
        in ended.err
    )
    assert worlds.opened == []


# Folders for the results


@pytest.mark.parametrize("below", ["", "runs", "runs/tonight"])
def test_a_file_in_place_of_the_output_folder(
    benchrun_command: Command, recipes: Path, worlds: Worlds, tmp_path: Path, below: str
) -> None:
    (tmp_path / "taken").write_text("mine")
    to = tmp_path / "taken" / below
    ended = benchrun_command("rehearse", recipes / CALIBRATE, "--to", to)
    reason = "Not a directory" if below else "it is a file"
    assert ended.err == (
        f"{to}: no run folder can be made here ({reason}). Nothing was switched on. "
        "Choose a folder that you may write to with --to.\n"
    )
    assert (ended.code, ended.out) == (2, "")
    assert worlds.untouched
    assert (tmp_path / "taken").read_text() == "mine"


def test_a_folder_that_may_not_be_written(
    benchrun_command: Command, recipes: Path, worlds: Worlds, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    runs, make = tmp_path / "runs", Path.mkdir

    def denied(self: Path, *arguments: object, **options: object) -> None:  # as root, permissions stop nobody
        if self.is_relative_to(runs):
            raise PermissionError(13, "Permission denied")
        make(self, *arguments, **options)

    monkeypatch.setattr(Path, "mkdir", denied)
    ended = benchrun_command("rehearse", recipes / CALIBRATE, "--to", runs)
    assert ended.err == (
        f"{runs}: no run folder can be made here (Permission denied). Nothing was switched on. "
        "Choose a folder that you may write to with --to.\n"
    )
    assert (ended.code, ended.out) == (2, "")
    assert worlds.untouched


@pytest.mark.parametrize(("file", "kind"), [(BENCH, "bench"), (KIT, "kit"), (DIALECT, "dialect")])
@pytest.mark.parametrize("command", ["levels", "rehearse"])
def test_another_kind_of_file_in_place_of_a_recipe_is_one_mistake(
    benchrun_command: Command, recipes: Path, worlds: Worlds, tmp_path: Path, command: str, file: str, kind: str
) -> None:
    path = recipes / file
    ended = benchrun_command(command, path, *(["--to", tmp_path / "runs"] if command == "rehearse" else []))
    message = f"this is a {kind} file by its name; a recipe is expected here: *.recipe.yaml."
    assert (ended.code, ended.err) == (2, f"{path}: {message}\n{NOTHING}")
    assert not worlds.opened
