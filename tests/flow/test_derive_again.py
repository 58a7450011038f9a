"""The same readings corrected again, next year and elsewhere: from the archive alone, with this calibration or that."""

from __future__ import annotations

import shutil
from collections.abc import Callable
from pathlib import Path

import numpy as np
import pytest
import skrf

from benchrun.archive import open_archive
from benchrun.errors import CalibrationError, FolderError, StoppedError
from benchrun.flow import RunResult, derive_again, show
from tests.flow.conftest import Way
from tests.flow.stage import CALIBRATE, HOT, Silence, change


def contents(folder: Path) -> dict[str, bytes]:
    """Every file of a result, by its path in it."""
    files = [path for path in folder.rglob("*") if path.is_file() and "result-" not in str(path.relative_to(folder))]
    return {str(path.relative_to(folder)): path.read_bytes() for path in files}


def results(folder: Path) -> dict[str, bytes]:
    return {name: text for name, text in contents(folder).items() if name.endswith((".s1p", ".csv", ".txt"))}


def reflections(folder: Path) -> np.ndarray:
    return np.array([skrf.Network(str(path)).s[:, 0, 0] for path in sorted(folder.glob("touchstone/*_S22.s1p"))])


def test_deriving_again_gives_the_same_beside_the_first(small: Way) -> None:
    before = contents(small.hot)
    again = derive_again(small.hot, {})
    assert again.folder == small.hot / "result-002"
    assert results(again.folder) == results(small.hot)
    after = contents(small.hot)
    assert {name: text for name, text in after.items() if name != "archive.sqlite"} == {
        name: text for name, text in before.items() if name != "archive.sqlite"
    }
    assert (again.state, list(again.table), list(again.notes)) == (
        "complete",
        list(small.result.table),
        list(small.result.notes),
    )
    assert derive_again(small.hot, {}).folder == small.hot / "result-003"


def test_the_readings_stay_what_they_were(small: Way) -> None:
    with open_archive(small.hot) as archive:
        digest = archive.digest()
    derive_again(small.hot, {})
    with open_archive(small.hot) as archive:
        assert archive.digest() == digest
        assert archive.check() == []
        used = [(p.kind, p.name, p.document["result"]) for p in archive.products() if p.kind.startswith("used")]
        assert used[-2:] == [
            ("used-calibration", "output-plane", "result-002"),
            ("used-levelling", "drive", "result-002"),
        ]


def test_the_archive_alone_is_enough(shared: Way, tmp_path: Path) -> None:
    elsewhere = tmp_path / "next year"
    elsewhere.mkdir()
    shutil.copy(shared.hot / "archive.sqlite", elsewhere)
    again = derive_again(elsewhere, {})
    assert again.folder == elsewhere
    assert results(elsewhere) == results(shared.hot)


def test_the_archive_of_a_calibration_alone_is_enough(shared: Way, tmp_path: Path) -> None:
    shutil.copy(shared.calibration / "archive.sqlite", tmp_path)
    again = derive_again(tmp_path / "archive.sqlite", {})
    assert results(again.folder) == results(shared.calibration)
    with open_archive(tmp_path) as archive:
        first, second = archive.products("calibration")
        assert first.document == second.document


@pytest.fixture
def other(small: Way, rehearse: Callable[..., RunResult]) -> Path:
    """The run of another calibration of the same world, with more noise."""
    change(small.recipes, "if-bandwidth: 100 Hz", "if-bandwidth: 10 kHz")
    return rehearse(CALIBRATE).folder


def test_another_calibration_gives_another_result(small: Way, other: Path) -> None:
    again = derive_again(small.hot, {"output-plane": other})
    first, second = reflections(small.hot), reflections(again.folder)
    assert not np.array_equal(first, second)
    np.testing.assert_allclose(second, first, atol=0.01)
    with open_archive(other) as archive:
        digest = archive.digest()
    comments = [skrf.Network(str(path)).comments for path in again.folder.glob("touchstone/*.s1p")]
    assert all(digest in text for text in comments)
    assert results(derive_again(small.hot, {}).folder) == results(again.folder)


def test_a_calibration_of_another_world_is_refused(small: Way, rehearse: Callable[..., RunResult]) -> None:
    before = contents(small.hot)
    other = rehearse(CALIBRATE, seed=2).folder
    with pytest.raises(CalibrationError, match="simulated, seed 2, and this run is simulated, seed 1"):
        derive_again(small.hot, {"output-plane": other})
    assert contents(small.hot) == before


@pytest.mark.parametrize(
    ("name", "run", "message"),
    [
        ("output-plane", "levelling", "made no calibration 'output-plane'"),
        ("outputplane", "calibration", "uses no calibration of this name; it uses output-plane, drive"),
        ("output-plane", "runs", "no run here"),
    ],
)
def test_a_calibration_that_is_not_there_is_refused(small: Way, name: str, run: str, message: str) -> None:
    with pytest.raises((CalibrationError, FolderError), match=message):
        derive_again(small.hot, {name: getattr(small, run)})
    assert not list(small.hot.glob("result-*"))


class Stopping(Silence):
    """An operator who presses Ctrl-C at a reading."""

    def __init__(self, at: int) -> None:
        super().__init__()
        self._at = at

    def reading(self, index: int, *told: object) -> None:
        if index == self._at:
            raise KeyboardInterrupt


def test_what_a_stopped_run_has_read_can_be_derived(small: Way, rehearse: Callable[..., RunResult]) -> None:
    with pytest.raises(StoppedError) as stopped:
        rehearse(HOT, listener=Stopping(12))
    folder = stopped.value.folder
    assert show(folder)["state"] == "stopped"
    again = derive_again(folder, {})
    found = [skrf.Network(str(path)) for path in sorted(again.folder.glob("touchstone/*_S22.s1p"))]
    assert [len(network) for network in found] == [9, 4]
    np.testing.assert_array_equal(found[0].s[:, 0, 0], reflections(small.hot)[0])


def test_a_run_without_readings_says_so(small: Way, rehearse: Callable[..., RunResult]) -> None:
    class AtOnce(Silence):
        def phase(self, *told: object) -> None:
            raise KeyboardInterrupt

    with pytest.raises(StoppedError) as stopped:
        rehearse(HOT, listener=AtOnce())
    with pytest.raises(FolderError, match="nothing to derive"):
        derive_again(stopped.value.folder, {})
