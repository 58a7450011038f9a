"""A run that was cut off anywhere ends as one that ran through; what has changed since is refused, nothing mixed."""

from __future__ import annotations

import os
import shutil
import signal
import subprocess
import sys
from collections.abc import Callable, Iterator
from contextlib import closing
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest

from benchrun.acquire.prompts import Answer, Prompt, RefusingPrompter, RehearsalPrompter
from benchrun.archive import ArchiveWriter, open_archive
from benchrun.cli.ending import run_to_end
from benchrun.contract.reading import Reading
from benchrun.errors import BenchrunError, CalibrationError, FolderError, IdentityError, InputError
from benchrun.flow import RunResult, ServedBench, rehearse, resume, run, simulate
from benchrun.flow.seam import apart_db, connected_before
from tests.archive.readings import reading
from tests.faults.flow.runs import READINGS, RECIPE
from tests.faults.flow.worlds import Worlds, complaints
from tests.flow.stage import BENCH, CALIBRATE, HOT, LEVEL, SMALL, Silence, change, recipes_in

KINDS = "every-kind.recipe.yaml"
FORGETFUL = ("rehearsal: {world: R1", "rehearsal: {thermal-memory: false, world: R1")
#: How far the output reflection of a resumed run may be from that of one that ran through, where the device remembers:
#: in R1, for this recipe cut at every second reading, the largest difference was measured at 1.4e-4.
MOST_APART = 5e-4


class CutError(Exception):
    """What ends a run in the middle."""


@dataclass(frozen=True)
class Whole:
    """Recipes, and the folder of runs that they were rehearsed into without a stop."""

    recipes: Path
    runs: Path

    def run(self, recipe: str) -> Path:
        """Return the run of a recipe that ran through."""
        (found,) = (path for path in self.runs.iterdir() if path.name.endswith(recipe.removesuffix(".recipe.yaml")))
        return found


def gone_through(place: Path, *changes: tuple[str, str]) -> Whole:
    recipes = recipes_in(place / "recipes", (*SMALL, *changes))
    (recipes / KINDS).write_text(RECIPE, "utf-8")
    for recipe in (KINDS, HOT):
        rehearse(recipes / recipe, place / "runs", seed=1, listener=Silence())
    return Whole(recipes, place / "runs")


@pytest.fixture(scope="module")
def whole(tmp_path_factory: pytest.TempPathFactory) -> Whole:
    """The small demo and every kind of step, on a device without thermal memory. Change nothing in it."""
    return gone_through(tmp_path_factory.mktemp("forgetful"), FORGETFUL)


@pytest.fixture(scope="module")
def remembering(tmp_path_factory: pytest.TempPathFactory) -> Whole:
    """The same with the device as it is. Change nothing in it."""
    return gone_through(tmp_path_factory.mktemp("remembering"))


def cut_at(index: int, start: Callable[[], RunResult]) -> Path:
    """Start something that ends when it would commit a reading; return the run folder."""
    commit = ArchiveWriter.commit

    def cut(self: ArchiveWriter, reading: Reading) -> None:
        if reading.index == index and reading.attempt == 0:
            raise CutError
        commit(self, reading)

    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(ArchiveWriter, "commit", cut)
        with pytest.raises(CutError) as caught:
            start()
    folder = caught.value.__dict__["folder"]
    assert isinstance(folder, Path)
    return folder


def cut_rehearsal(whole: Whole, recipe: str, index: int, place: Path) -> Path:
    """Rehearse a recipe on the calibrations that are there, in a folder of its own, up to a reading."""
    runs = Path(shutil.copytree(whole.runs, place / "runs"))
    return cut_at(index, lambda: rehearse(whole.recipes / recipe, runs, seed=1, listener=Silence()))


def resumed(folder: Path, **how: Any) -> RunResult:
    return resume(folder, listener=Silence(), prompter=RefusingPrompter(), **how)


def digest(folder: Path) -> str:
    with open_archive(folder) as archive:
        return archive.digest()


def require_once(folder: Path, readings: int) -> None:
    with open_archive(folder) as archive:
        assert archive.check() == []
        assert archive.count == archive.count_all == readings
        assert archive.meta.state == "complete"


# The same digest with thermal memory off


@pytest.mark.parametrize("index", range(READINGS))
def test_every_kind_of_step_cut_before_any_reading_ends_with_the_same_digest(
    whole: Whole, tmp_path: Path, worlds: Worlds, index: int
) -> None:
    folder = cut_rehearsal(whole, KINDS, index, tmp_path)
    with open_archive(folder) as archive:
        assert (archive.meta.state, archive.count) == ("failed", index)
    result = resumed(folder)
    assert (result.folder, result.state, result.exit_code) == (folder, "complete", 0)
    assert digest(folder) == digest(whole.run(KINDS))
    require_once(folder, READINGS)
    assert [found for world in worlds.opened for found in complaints(world)] == []
    with open_archive(folder) as archive:
        (event,) = archive.log("resumed")
        assert event.text == f"Resumed at reading {index} of {READINGS}."
        assert event.detail["state_before"] == "failed"


@pytest.mark.parametrize(("recipe", "index"), [(CALIBRATE, 5), (CALIBRATE, 20), (LEVEL, 29), (HOT, 10)])
def test_recipes_with_connections_calibrations_and_levels(
    whole: Whole, tmp_path: Path, recipe: str, index: int
) -> None:
    folder = cut_rehearsal(whole, recipe, index, tmp_path)
    resumed(folder)
    assert digest(folder) == digest(whole.run(recipe))
    require_once(folder, len(list(readings(folder))))


def readings(folder: Path) -> Iterator[Reading]:
    with open_archive(folder) as archive:
        yield from archive.readings()


def test_the_files_are_those_of_a_run_that_ran_through(whole: Whole, tmp_path: Path) -> None:
    folder = cut_rehearsal(whole, HOT, 13, tmp_path)
    assert not (folder / "summary.csv").exists()
    resumed(folder)
    through = whole.run(HOT)
    assert (folder / "summary.csv").read_bytes() == (through / "summary.csv").read_bytes()
    names = sorted(path.name for path in (through / "touchstone").iterdir())
    assert sorted(path.name for path in (folder / "touchstone").iterdir()) == names
    for name in names:
        assert figures(folder / "touchstone" / name) == figures(through / "touchstone" / name)


def figures(path: Path) -> list[str]:
    return [line for line in path.read_text("iso-8859-1").splitlines() if not line.startswith("!")]


def test_cut_again_and_again(whole: Whole, tmp_path: Path) -> None:
    folder = cut_rehearsal(whole, KINDS, 0, tmp_path)
    for index in range(1, READINGS):
        assert cut_at(index, lambda: resumed(folder)) == folder
    resumed(folder)
    assert digest(folder) == digest(whole.run(KINDS))
    require_once(folder, READINGS)
    with open_archive(folder) as archive:
        assert [event.detail["index"] for event in archive.log("resumed")] == [0, 1, 2, 3, 4]


@pytest.mark.parametrize("at", [60, 150, 230])
def test_an_instrument_that_failed(whole: Whole, tmp_path: Path, worlds: Worlds, at: int) -> None:
    worlds.arm = lambda world: world.faults.add("connection-reset", at=at, times=3)
    with pytest.raises(BenchrunError) as failed:
        rehearse(whole.recipes / KINDS, tmp_path / "runs", seed=1, listener=Silence())
    folder = failed.value.__dict__["folder"]
    worlds.arm = lambda _world: None
    resumed(folder)
    assert digest(folder) == digest(whole.run(KINDS))
    require_once(folder, READINGS)


KILLED = """\
import os, signal, sys
from pathlib import Path
from benchrun.archive import ArchiveWriter
from benchrun.flow import rehearse
from tests.flow.stage import Silence
commit = ArchiveWriter.commit
def dying(self, reading):
    if reading.index == {index}:
        {before}
        os.kill(os.getpid(), signal.SIGKILL)
    commit(self, reading)
ArchiveWriter.commit = dying
rehearse(Path(sys.argv[1]), Path(sys.argv[2]), seed=1, listener=Silence())
"""


@pytest.mark.skipif(sys.platform == "win32", reason="there is no SIGKILL")
@pytest.mark.parametrize(("index", "before", "there"), [(2, "pass", 2), (READINGS - 1, "commit(self, reading)", 5)])
def test_a_killed_process(whole: Whole, tmp_path: Path, index: int, before: str, there: int) -> None:
    """Killed before a reading was committed, and after the last one was: all readings are there, the end is not."""
    code = KILLED.format(index=index, before=before)
    told = [sys.executable, "-c", code, str(whole.recipes / KINDS), str(tmp_path / "runs")]
    ended = subprocess.run(told, cwd=Path(__file__).parents[2], check=False, capture_output=True, env=dict(os.environ))
    assert ended.returncode == -signal.SIGKILL, ended.stderr.decode()
    (folder,) = (tmp_path / "runs").iterdir()
    with open_archive(folder) as archive:
        assert (archive.meta.state, archive.count) == ("running", there)
    assert resumed(folder).state == "complete"
    assert digest(folder) == digest(whole.run(KINDS))
    require_once(folder, READINGS)


PASSED_OVER = """\
benchrun: 1
title: Something that is passed over
bench: balloon-driver.bench.yaml
receiver: {if-bandwidth: 1 kHz, averages: 1}
acquire:
  - set: {probe.level: 0 dBm, probe.frequency: 2.3 GHz}
  - read: {name: before, tones: [probe]}
  - connect: {plane: output, what: open}
  - read: {name: open, tones: [probe]}
  - read: {name: again, tones: [probe]}
  - connect: {plane: output, what: short}
  - read: {name: short, tones: [probe]}
  - read: {name: after, tones: [probe]}
"""


@pytest.mark.parametrize("index", [3, 4])
def test_what_the_operator_passed_over_stays_passed_over(
    whole: Whole, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, index: int
) -> None:
    recipe = whole.recipes / "passed-over.recipe.yaml"
    kit = "kit: field-kit.kit.yaml\n"
    recipe.write_text(PASSED_OVER.replace("receiver:", f"{kit}receiver:"), "utf-8")
    ask = RehearsalPrompter.ask
    skipping = lambda self, prompt: "skip" if prompt.connect == ("output", "open") else ask(self, prompt)  # noqa: E731
    with monkeypatch.context() as patch:
        patch.setattr(RehearsalPrompter, "ask", skipping)
        folder = cut_at(index, lambda: rehearse(recipe, tmp_path, seed=1, listener=Silence()))
    resumed(folder)
    assert [one.name for one in readings(folder)] == ["before", "short", "after"]
    with open_archive(folder) as archive:
        (event,) = archive.log("resumed")
        assert event.detail["index"] == index


@pytest.mark.parametrize(
    ("kind", "detail"), [("skipped", "{}"), ("skipped", '{"last": []}'), ("bench-time", '{"start_ns": "soon"}')]
)
def test_a_log_that_makes_no_sense(whole: Whole, hot: Path, kind: str, detail: str) -> None:
    with ArchiveWriter.append(hot) as writer:
        writer._connection.execute("DELETE FROM event WHERE kind = ?", (kind,))
        writer._connection.execute(
            "INSERT INTO event (kind, text, detail, at_ns, at_utc) VALUES (?, '', ?, 0, '')", (kind, detail)
        )
    require_refused(hot, FolderError, "makes no sense")


# With thermal memory: the seam


@pytest.mark.parametrize("index", [4, 20])
def test_a_device_that_remembers_is_let_settle_and_read_again(remembering: Whole, tmp_path: Path, index: int) -> None:
    folder = cut_rehearsal(remembering, HOT, index, tmp_path)
    resumed(folder)
    with open_archive(folder) as archive:
        assert archive.check() == []
        assert (archive.count, archive.count_all) == (27, 28)
        first, again = archive.attempts(index - 1)
        assert (first.attempt, again.attempt) == (0, 1)
        assert ("resumed" in first.flags, "resumed" in again.flags) == (False, True)
        flagged = [one.index for one in archive.readings() if "resumed" in one.flags]
        assert flagged == [index - 1, index]
        (seam,) = archive.log("seam")
        assert seam.detail["index"] == index - 1
        assert seam.detail["largest_db"] == pytest.approx(apart_db(first, again))
        assert 0.0 < seam.detail["largest_db"] < 0.02
    apart = np.abs(reflection(folder) - reflection(remembering.run(HOT)))
    assert apart.shape == (27,)
    assert np.max(apart[: index - 1], initial=0.0) == 0.0
    assert 0.0 < np.max(apart) < MOST_APART


def reflection(folder: Path) -> np.ndarray[Any, np.dtype[np.complex128]]:
    """Return the corrected output reflection from the files that were saved."""
    rows = []
    for path in sorted((folder / "touchstone").glob("*S22.s1p")):
        rows += [line.split()[1:3] for line in figures(path) if line and not line.startswith("#")]
    first, second = np.array(rows, dtype=float).T
    option = next(line for line in figures(path) if line.startswith("#")).split()
    assert "RI" in option or "MA" in option
    return first + 1j * second if "RI" in option else first * np.exp(1j * np.radians(second))


def test_nothing_is_read_again_across_a_question_to_the_operator(remembering: Whole, tmp_path: Path) -> None:
    """Reading 4 is behind the connection of the power meter: RF and drain were down there in any case."""
    folder = cut_rehearsal(remembering, KINDS, 4, tmp_path)
    resumed(folder)
    with open_archive(folder) as archive:
        assert archive.count == archive.count_all == READINGS
        assert [one.index for one in archive.readings() if "resumed" in one.flags] == [4]
        assert archive.log("seam") == []


def test_how_far_apart_two_readings_are() -> None:
    one = reading()
    assert apart_db(one, one) == 0.0
    largest = float(np.max(np.abs(one.data)))
    data = one.data.copy()
    data[0, 0, 0] += 0.1 * largest
    assert apart_db(one, replace(one, data=data)) == pytest.approx(20.0 * np.log10(1.1))
    bare = replace(one, data=np.empty((0, 0, 0), dtype=np.complex128), scalars={"meter.power_dbm": 10.0})
    assert apart_db(bare, replace(bare, scalars={"meter.power_dbm": 11.0})) == pytest.approx(20.0 * np.log10(1.1))
    assert apart_db(replace(bare, scalars={}), replace(bare, scalars={})) == 0.0


# A run that is whole


def test_a_complete_run_is_left_as_it_is(
    whole: Whole, tmp_path: Path, worlds: Worlds, capsys: pytest.CaptureFixture[str]
) -> None:
    folder = Path(shutil.copytree(whole.run(KINDS), tmp_path / "run"))
    before = (folder / "archive.sqlite").read_bytes()
    assert run_to_end(["resume", str(folder)]) == 0
    said = capsys.readouterr()
    assert "nothing to resume" in said.err
    assert "5 of 5 readings" in said.err
    assert said.out == f"{folder}\n"
    assert (folder / "archive.sqlite").read_bytes() == before
    assert worlds.opened == []


def test_the_command_resumes_in_another_place_and_names_the_folder_last(
    whole: Whole, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    folder = cut_rehearsal(whole, HOT, 5, tmp_path / "here")
    moved = Path(shutil.move(folder, tmp_path / "moved"))
    shutil.rmtree(tmp_path / "here")  # the runs that made its calibrations as well
    assert run_to_end(["resume", str(moved)]) == 0
    said = capsys.readouterr()
    assert said.out.splitlines()[-1] == str(moved)
    assert "Resumed at reading 5 of 27" in said.err
    assert digest(moved) == digest(whole.run(HOT))


def test_there_is_no_run(tmp_path: Path) -> None:
    with pytest.raises(FolderError, match="there is no run here"):
        resumed(tmp_path)


# What has changed since is refused


@pytest.fixture(scope="module")
def hot_cut(whole: Whole, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A hot run that was cut off at reading 3, beside those that made its calibrations. Change nothing in it."""
    return cut_rehearsal(whole, HOT, 3, tmp_path_factory.mktemp("hot"))


@pytest.fixture
def hot(hot_cut: Path, tmp_path: Path) -> Path:
    """A copy of it, to be changed."""
    return Path(shutil.copytree(hot_cut, tmp_path / "hot"))


def require_refused(folder: Path, error: type[BenchrunError], *words: str, **how: Any) -> None:
    before = digest(folder), counted(folder)
    with pytest.raises(error) as refused:
        resumed(folder, **how)
    for word in words:
        assert word in str(refused.value)
    assert (digest(folder), counted(folder)) == before


def counted(folder: Path) -> int:
    with open_archive(folder) as archive:
        return archive.count_all


def update(folder: Path, **changes: Any) -> None:
    with ArchiveWriter.append(folder) as writer:
        writer.update(**changes)


def test_a_recipe_that_was_edited_beside_the_archive(hot: Path, worlds: Worlds) -> None:
    change(hot, "20 ms", "30 ms")
    require_refused(hot, InputError, f"{HOT} was changed since", "never mixed", "Nothing was switched on")
    assert worlds.opened == []


@pytest.mark.parametrize(
    ("name", "word"),
    [("benchrun", "benchrun was 0.0.1, and is"), ("plugin others (somebody)", "0.0.1, and is not installed")],
)
def test_other_software(hot: Path, worlds: Worlds, name: str, word: str) -> None:
    with open_archive(hot) as archive:
        versions = {**archive.meta.versions, name: "0.0.1"}
    update(hot, versions=versions)
    require_refused(hot, InputError, word)
    assert worlds.opened == []


def test_another_schedule(hot: Path, worlds: Worlds) -> None:
    update(hot, schedule_hash="0" * 64)
    require_refused(hot, InputError, "the schedule is another one", "000000000000, 27 readings")
    assert worlds.opened == []


def test_a_calibration_that_was_made_anew_in_its_run(hot: Path, worlds: Worlds) -> None:
    with open_archive(hot) as archive:
        used = {event.text: str(event.detail["run"]) for event in archive.log("calibration")}
    first = next(path for text, path in used.items() if "output-plane" in text)
    made_in = Path(shutil.copytree(first, hot.with_name("calibrated")))
    with ArchiveWriter.append(hot) as writer:
        writer._connection.execute("UPDATE event SET detail = replace(detail, ?, ?)", (first, str(made_in)))
    with ArchiveWriter.append(made_in) as writer, open_archive(made_in) as archive:
        (product,) = archive.products("calibration")
        circumstances = {**product.document["circumstances"], "made_utc": "2026-01-01T00:00:00+00:00"}
        writer.product("calibration", product.name, {**product.document, "circumstances": circumstances})
    require_refused(hot, CalibrationError, "calibration 'output-plane' of", "is another than the run began with")
    assert worlds.opened == []


def test_a_run_that_broke_off_before_it_kept_its_calibrations(hot: Path) -> None:
    with ArchiveWriter.append(hot) as writer:
        writer._connection.execute("DELETE FROM product")
    require_refused(hot, CalibrationError, "calibration 'output-plane' is not in its archive")


def test_the_calibrations_are_those_that_the_run_began_with(whole: Whole, hot: Path) -> None:
    """Also where the part that is there was derived with others meanwhile."""
    from benchrun.flow import derive_again

    derive_again(hot, {})
    resumed(hot)
    assert digest(hot) == digest(whole.run(HOT))
    assert (hot / "result-002" / "summary.csv").read_bytes() == (whole.run(HOT) / "summary.csv").read_bytes()


def test_other_instruments(hot: Path, worlds: Worlds) -> None:
    with open_archive(hot) as archive:
        identities = {name: dict(who) for name, who in archive.meta.identities.items()}
    identities["pump"]["serial"] = "another"
    update(hot, identities=identities)
    require_refused(hot, IdentityError, "pump answers with serial", "was 'another'", "Made safe")
    assert complaints(worlds.last) == []
    with open_archive(hot) as archive:
        assert archive.meta.state == "failed"


def test_a_run_that_is_being_written(hot: Path) -> None:
    with ArchiveWriter.append(hot), pytest.raises(FolderError, match="another benchrun writes to this run"):
        resumed(hot)


# A served bench, and the way of a real one


@pytest.fixture(scope="module")
def served(whole: Whole, tmp_path_factory: pytest.TempPathFactory) -> Iterator[tuple[ServedBench, Path]]:
    written = tmp_path_factory.mktemp("served") / "served.bench.yaml"
    with closing(simulate(whole.recipes / BENCH, 1, written)) as bench:
        yield bench, written


def test_a_served_bench(whole: Whole, served: tuple[ServedBench, Path], tmp_path: Path) -> None:
    bench, listener = served[1], Silence()
    folder = cut_at(3, lambda: rehearse(whole.recipes / KINDS, tmp_path, bench=bench, listener=listener))
    resumed(folder)
    assert digest(folder) == digest(whole.run(KINDS))


def test_a_bench_that_is_served_elsewhere_now(whole: Whole, served: tuple[ServedBench, Path], tmp_path: Path) -> None:
    folder = cut_rehearsal(whole, KINDS, 3, tmp_path)
    resumed(folder, bench=served[1])
    assert digest(folder) == digest(whole.run(KINDS))


def test_another_bench(whole: Whole, served: tuple[ServedBench, Path], tmp_path: Path) -> None:
    folder = cut_rehearsal(whole, KINDS, 3, tmp_path)
    other = served[1].with_name("other.bench.yaml")
    other.write_text(served[1].read_text("utf-8").replace("saturation: 43 dBm", "saturation: 44 dBm"), "utf-8")
    assert other.read_text("utf-8") != served[1].read_text("utf-8")
    require_refused(folder, InputError, "other.bench.yaml: device.saturation is not what it was", bench=other)


def test_a_bench_of_another_seed(whole: Whole, tmp_path: Path) -> None:
    folder = cut_rehearsal(whole, KINDS, 3, tmp_path)
    written = tmp_path / "seed-2" / "served.bench.yaml"
    with closing(simulate(whole.recipes / BENCH, 2, written)):
        require_refused(folder, InputError, "with seed 2", "rehearsed with seed 1", bench=written)


class Obliging:
    """An operator who does what he is asked to."""

    available = True

    def __init__(self) -> None:
        self.asked: list[tuple[str, str] | None] = []

    def ask(self, prompt: Prompt) -> Answer:
        """Do it."""
        self.asked.append(prompt.connect)
        return "proceed"


def test_a_real_bench(whole: Whole, served: tuple[ServedBench, Path], tmp_path: Path) -> None:
    """The bench is asked for again, what had been connected is asked for again, and bench time goes on."""
    real = served[1].with_name("real.bench.yaml")
    lines = served[1].read_text("utf-8").splitlines(keepends=True)
    real.write_text("".join(x for x in lines if not x.startswith(("simulated:", "rehearsal-channel:"))), "utf-8")
    first, second = Obliging(), Obliging()
    quick = tmp_path / "quick.recipe.yaml"  # without the search for the quiescent current, which waits in real time
    quick.write_text(RECIPE.replace(", quiescent: 350 mA, within: 10 mA, gate-range: [-3.4 V, -2.2 V]", ""), "utf-8")
    started = cut_at(3, lambda: run(quick, tmp_path, bench=real, listener=Silence(), prompter=first))
    with pytest.raises(InputError, match="this bench is marked simulated, and the run was made on the real one"):
        resume(started, bench=served[1], listener=Silence(), prompter=second)
    result = resume(started, listener=Silence(), prompter=second)
    assert (result.state, first.asked) == ("complete", [("output", "device")])
    assert second.asked == [("output", "device"), ("input", "meter"), ("input", "device")]
    with open_archive(started) as archive:
        assert archive.meta.origin == "real"
        assert (archive.count, archive.count_all) == (READINGS, READINGS + 1)
        times_ns = [one.started_ns for one in archive.readings(every_attempt=True)]
        assert sorted(times_ns) == [times_ns[n] for n in (0, 1, 2, 3, 4, 5)]
        assert [one.index for one in archive.readings() if "resumed" in one.flags] == [2, 3]


def test_nobody_is_there_to_be_asked(whole: Whole, served: tuple[ServedBench, Path], tmp_path: Path) -> None:
    folder = cut_rehearsal(whole, KINDS, 3, tmp_path)
    update(folder, origin="real", seed=None)
    require_refused(folder, InputError, "there is no terminal to ask at")


def test_matings_that_are_made_up_for() -> None:
    """Every connection before a reading but those that its walk asks for again, each by its plane."""
    from benchrun.contract.actions import AskAction, ReadAction

    asked = [("a", "open"), ("b", "meter"), ("a", "short"), ("a", "match")]

    class Planned:
        def __init__(self, action: Any, index: int | None) -> None:
            self.action, self.reading_index = action, index

    class Plan:
        def walk(self, start: int = 0) -> Iterator[Planned]:
            if start:
                for connect in (("b", "meter"), ("a", "short")):
                    yield Planned(AskAction("", connect=connect), None)
            for index, connect in enumerate(asked):
                if index > start or start == 0:
                    yield Planned(AskAction("", connect=connect), None)
                yield Planned(ReadAction("x", None, ()), index)

    assert connected_before(Plan(), 2) == [("a", "open")]  # type: ignore[arg-type]
    assert connected_before(Plan(), 0) == []  # type: ignore[arg-type]
