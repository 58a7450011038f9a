"""The command as a user starts it: a process of its own, files, signals, the run folder on the last line."""

from __future__ import annotations

import contextlib
import json
import os
import shutil
import signal
import subprocess
import sys
import time
from collections.abc import Iterator
from pathlib import Path

import pytest

from benchrun.archive import open_archive
from benchrun.errors import BenchrunError

RECIPES = Path(__file__).parents[2] / "recipes"
BENCHRUN = [sys.executable, "-W", "error", "-m", "benchrun"]
POSIX = pytest.mark.skipif(os.name == "nt", reason="signals of POSIX")


def command(*arguments: object) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [*BENCHRUN, *map(str, arguments)],
        stdin=subprocess.DEVNULL, capture_output=True, text=True, check=False, timeout=120,
    )  # fmt: skip


@pytest.fixture(scope="module")
def runs(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return tmp_path_factory.mktemp("runs")


@pytest.fixture(scope="module")
def cold(runs: Path) -> Path:
    """A rehearsed run of the cold one-port; its calibration is rehearsed first."""
    ended = command("rehearse", RECIPES / "cold-output-reflection.recipe.yaml", "--to", runs, "--seed", 4)
    assert ended.returncode == 0, ended.stderr
    assert "absent" in ended.stderr
    return Path(ended.stdout.splitlines()[-1])


def test_the_example_files_have_no_mistakes():
    ended = command("check", *sorted(RECIPES.glob("*.yaml")))
    assert (ended.returncode, ended.stderr) == (0, "")


def test_a_rehearsal_leaves_a_run_folder_named_on_the_last_line(cold, runs):
    assert cold.parent == runs
    assert (cold / "archive.sqlite").is_file()
    assert list(cold.glob("touchstone/*.s1p"))


def test_what_a_run_holds_can_be_read_by_a_script(cold):
    document = json.loads(command("show", cold, "--json").stdout)
    assert document["state"] == "complete"
    assert document["readings"] == document["readings_planned"]


def test_the_calibration_is_listed_and_can_be_named(cold, runs):
    records = json.loads(command("calibrations", runs, "--json").stdout)
    (made,) = (record for record in records if record["name"] == "output-plane")
    ended = command("derive", cold, "--calibration", f"output-plane={made['run']}")
    assert ended.returncode == 0, ended.stderr
    assert list(cold.glob("result-*/touchstone/*.s1p"))


def test_exported_files_are_where_it_says(cold, tmp_path):
    ended = command("export", cold, "--as", "touchstone", "--to", tmp_path / "out")
    assert ended.returncode == 0, ended.stderr
    assert all(Path(line).is_file() for line in ended.stdout.splitlines())
    assert ended.stdout


def test_a_run_with_prompts_and_no_terminal_is_refused_and_leaves_nothing(tmp_path):
    ended = command("run", RECIPES / "calibrate-output-plane.recipe.yaml", "--to", tmp_path / "runs")
    assert ended.returncode == 2
    assert "no terminal" in ended.stderr
    assert ended.stdout == ""
    assert not (tmp_path / "runs").exists()


def test_a_level_over_its_limit_is_refused_with_3(tmp_path):
    for path in RECIPES.glob("*.yaml"):
        shutil.copy(path, tmp_path)
    bench = tmp_path / "balloon-driver.bench.yaml"
    bench.write_text(
        bench.read_text("utf-8").replace("P3: {kind: pad, loss: 10 dB", "P3: {kind: pad, loss: 1 dB"), "utf-8"
    )
    for ended in (
        command("levels", tmp_path / "hot-output-match.recipe.yaml"),
        command("rehearse", tmp_path / "hot-output-match.recipe.yaml", "--to", tmp_path / "runs"),
    ):
        assert ended.returncode == 3, ended.stderr
        assert "Nothing was switched on" in ended.stderr
        assert "reflected" in ended.stderr
        assert "inside its limit" not in ended.stdout


@contextlib.contextmanager
def started(*arguments: object) -> Iterator[subprocess.Popen[str]]:
    """A command that goes on until it is stopped."""
    with subprocess.Popen(
        [*BENCHRUN, *map(str, arguments)],
        stdin=subprocess.DEVNULL, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True,
    ) as process:  # fmt: skip
        try:
            yield process
        finally:
            process.kill()


def committed(folder: Path) -> int:
    with open_archive(folder) as archive:
        return archive.count


def wait_for_readings(runs: Path, process: subprocess.Popen[str]) -> Path:
    for _ in range(1200):
        assert process.poll() is None, process.communicate()
        for folder in runs.glob("*/archive.sqlite"):
            with contextlib.suppress(BenchrunError):
                if committed(folder.parent):
                    return folder.parent
        time.sleep(0.05)
    pytest.fail("no reading within a minute")


@POSIX
@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM, signal.SIGHUP])
def test_a_signal_ends_a_run_with_4_and_everything_committed_is_there(tmp_path, number):
    recipe = RECIPES / "level-the-drive.recipe.yaml"  # needs no calibration; in real time it would go on for minutes
    with started("rehearse", recipe, "--to", tmp_path, "--real-time") as process:
        folder = wait_for_readings(tmp_path, process)
        process.send_signal(number)
        out, err = process.communicate(timeout=60)
    assert process.returncode == 4, err
    assert out.splitlines()[-1] == str(folder)
    assert "Traceback" not in err
    assert "sources off" in err
    document = json.loads(command("show", folder, "--json").stdout)
    assert document["state"] == "stopped"
    assert 0 < document["readings"] < document["readings_planned"]


@POSIX
@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM])
def test_a_served_bench_is_there_until_a_signal_and_ends_with_0(tmp_path, number):
    served = tmp_path / "served.bench.yaml"
    with started("simulate", RECIPES / "balloon-driver.bench.yaml", "--write-bench", served) as process:
        lines = [process.stdout.readline() for _ in range(8)]
        assert lines[-1].split()[-1:] == [str(served)], lines
        ended = command("identify", lines[1].split()[-1])
        assert (ended.returncode, ended.stderr) == (0, "")
        assert "signal-source" in ended.stdout
        process.send_signal(number)
        _out, err = process.communicate(timeout=60)
    assert process.returncode == 0, err
    assert "Traceback" not in err
