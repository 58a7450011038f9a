"""A calibration that is missing, or for other pads, another grid or date: told before any instrument is touched."""

from __future__ import annotations

import datetime
import re
from collections.abc import Callable
from pathlib import Path

import pytest
import pyvisa

from benchrun.archive import ArchiveWriter, open_archive
from tests.cli.conftest import Ended
from tests.faults.flow.worlds import Worlds

Command = Callable[..., Ended]
HOT, COLD = "hot-output-match.recipe.yaml", "cold-output-reflection.recipe.yaml"
CALIBRATE, BENCH = "calibrate-output-plane.recipe.yaml", "balloon-driver.bench.yaml"


def change(path: Path, old: str, new: str) -> None:
    text = path.read_text(encoding="utf-8")
    assert old in text, f"{path.name} has no {old}"
    path.write_text(text.replace(old, new), encoding="utf-8")


@pytest.fixture
def calibration(benchrun_command: Command, worlds: Worlds, recipes: Path, tmp_path: Path) -> Path:
    """A run that calibrated the output plane, on fewer points than the demo's; afterwards no world is known."""
    change(recipes / CALIBRATE, "points: 89", "points: 12")
    ended = benchrun_command("rehearse", recipes / CALIBRATE, "--to", tmp_path / "calibrations")
    assert ended.code == 0, ended.err
    worlds.opened.clear()
    return Path(ended.out.splitlines()[-1])


def test_it_does_fit_where_nothing_was_changed(
    benchrun_command: Command, worlds: Worlds, recipes: Path, tmp_path: Path, calibration: Path
) -> None:
    given = f"output-plane={calibration}"
    ended = benchrun_command("rehearse", recipes / COLD, "--to", tmp_path / "runs", "--calibration", given)
    assert ended.code == 0, ended.err
    assert len(worlds.opened) == 1


def test_a_real_run_without_a_calibration(
    benchrun_command: Command, recipes: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def refuse(*_: object) -> None:
        raise AssertionError("a VISA library was opened")

    monkeypatch.setattr(pyvisa, "ResourceManager", refuse)
    runs = tmp_path / "runs"
    ended = benchrun_command("run", recipes / COLD, "--to", runs)
    assert (ended.code, ended.out) == (2, "")
    assert ended.err == (
        f"calibration 'output-plane' is missing: no run in {runs} holds one that fits this bench.\n"
        f"    Make it with {recipes / CALIBRATE}, or name a run with --calibration output-plane=RUN. "
        "Nothing was switched on.\n"
    )
    assert not runs.exists()


def test_a_simulated_calibration_for_a_real_run(
    benchrun_command: Command, recipes: Path, tmp_path: Path, calibration: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def refuse(*_: object) -> None:
        raise AssertionError("a VISA library was opened")

    monkeypatch.setattr(pyvisa, "ResourceManager", refuse)
    ended = benchrun_command("run", recipes / COLD, "--to", calibration.parent)
    assert (ended.code, ended.out) == (2, "")
    assert re.search(rf"\n    {re.escape(str(calibration))}: calibration 'output-plane' is simulated", ended.err)
    assert "Nothing was switched on." in ended.err


def require_refused(ended: Ended, worlds: Worlds, reason: str) -> None:
    assert (ended.code, ended.out) == (2, ""), ended.err
    assert re.fullmatch(rf"{reason} Nothing was switched on\.\n", ended.err), ended.err
    assert worlds.opened == []


def test_other_pads(
    benchrun_command: Command, worlds: Worlds, recipes: Path, tmp_path: Path, calibration: Path
) -> None:
    change(recipes / BENCH, "P3: {kind: pad, loss: 10 dB", "P3: {kind: pad, loss: 20 dB")
    given = f"output-plane={calibration}"
    ended = benchrun_command("rehearse", recipes / COLD, "--to", tmp_path / "runs", "--calibration", given)
    reason = (
        rf"{re.escape(str(calibration))}: calibration 'output-plane' was made with other parts: "
        r"P3 was 10 dB pad; the bench now has 20 dB pad there\. Calibrate again, or put the old parts back\."
    )
    require_refused(ended, worlds, reason)


def test_pads_that_were_changed_since_make_it_absent_for_a_rehearsal(
    benchrun_command: Command, worlds: Worlds, recipes: Path, calibration: Path
) -> None:
    change(recipes / BENCH, "P3: {kind: pad, loss: 10 dB", "P3: {kind: pad, loss: 9 dB")
    ended = benchrun_command("rehearse", recipes / COLD, "--to", calibration.parent)
    assert ended.code == 0, ended.err
    assert ended.err.startswith(f"Calibration 'output-plane' is absent: {recipes / CALIBRATE} is rehearsed first.\n")
    assert len(worlds.opened) == 2


@pytest.mark.parametrize("recipe", [COLD, HOT])
def test_another_grid(benchrun_command: Command, worlds: Worlds, recipes: Path, tmp_path: Path, recipe: str) -> None:
    """The image's tones count as well: the calibration reaches the probe and the pump, and not the image."""
    change(recipes / CALIBRATE, "points: 89", "points: 12")
    change(recipes / CALIBRATE, "from: 2.18 GHz", "from: 2.19 GHz" if recipe == HOT else "from: 2.21 GHz")
    change(recipes / "level-the-drive.recipe.yaml", "points: 22", "points: 3")
    ended = benchrun_command("rehearse", recipes / recipe, "--to", tmp_path / "runs")
    made = sorted(folder.name.split("_")[-1] for folder in (tmp_path / "runs").iterdir())
    assert made == ["calibrate-output-plane", "level-the-drive"][: len(worlds.opened)]
    assert len(worlds.opened) == (2 if recipe == HOT else 1)
    low = "2.19 GHz" if recipe == HOT else "2.21 GHz"
    wanted = "2.186 GHz" if recipe == HOT else "2.2 GHz"
    assert ended.code == 2
    assert ended.err.splitlines()[-1] == (
        f"calibration 'output-plane' covers {low} to 2.4 GHz; the tones of the readings, image included, run from "
        f"{wanted} to 2.4 GHz. Calibrate over that range. Nothing was switched on."
    )


def test_expired(benchrun_command: Command, worlds: Worlds, recipes: Path, tmp_path: Path, calibration: Path) -> None:
    with open_archive(calibration) as archive:
        (product,) = archive.products("calibration")
    long_ago = (datetime.datetime.now(datetime.UTC) - datetime.timedelta(days=30)).isoformat()
    circumstances = {**product.document["circumstances"], "made_utc": long_ago, "valid_until_utc": long_ago}
    with ArchiveWriter.append(calibration) as writer:
        writer.product("calibration", "output-plane", {**product.document, "circumstances": circumstances})
    given = f"output-plane={calibration}"
    ended = benchrun_command("rehearse", recipes / COLD, "--to", tmp_path / "runs", "--calibration", given)
    assert ended.code == 2
    assert re.search(r"calibration 'output-plane' expired on \d{4}-\d\d-\d\d ", ended.err), ended.err
    assert "Calibrate again. Nothing was switched on." in ended.err
    assert worlds.opened == []


def test_of_another_simulated_world(
    benchrun_command: Command, worlds: Worlds, recipes: Path, tmp_path: Path, calibration: Path
) -> None:
    given = f"output-plane={calibration}"
    ended = benchrun_command("rehearse", recipes / COLD, "--to", tmp_path / "runs", "--seed", 2, "--calibration", given)
    reason = (
        rf"{re.escape(str(calibration))}: calibration 'output-plane' is simulated, seed 1, and this run is simulated, "
        r"seed 2\. Calibrate in the same world\."
    )
    require_refused(ended, worlds, reason)


@pytest.mark.parametrize(
    ("given", "message"),
    [
        ("outputplane={run}", r"--calibration outputplane: the recipe uses no calibration of this name.* output-plane"),
        ("output-plane={nowhere}", r"{nowhere}: there is no run here"),
        ("output-plane={empty}", r"{empty}: there is no run here"),
        ("output-plane", r".*'output-plane' is not NAME=RUN"),
    ],
)
def test_a_choice_that_is_none(
    benchrun_command: Command,
    worlds: Worlds,
    recipes: Path,
    tmp_path: Path,
    calibration: Path,
    given: str,
    message: str,
) -> None:
    (tmp_path / "empty").mkdir()
    places = {"run": calibration, "nowhere": tmp_path / "nowhere", "empty": tmp_path / "empty"}
    ended = benchrun_command(
        "rehearse", recipes / COLD, "--to", tmp_path / "runs", "--calibration", given.format(**places)
    )
    assert (ended.code, ended.out) == (2, "")
    assert re.search(message.format(**places), ended.err), ended.err
    assert worlds.opened == []
