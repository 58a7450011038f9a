"""The disk is full, at any moment of a run: RF off, what was committed is there, and the message says what to do."""

from __future__ import annotations

import contextlib
import os
import re
import shutil
import subprocess
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import pytest

from benchrun.archive import ArchiveWriter, open_archive
from benchrun.errors import FolderError
from tests.archive.test_disk import FailingDisk
from tests.cli.conftest import Ended
from tests.faults.flow.runs import READINGS, RECIPE
from tests.faults.flow.worlds import Worlds, complaints

#: What may follow: how to go on with what there is.
RESUME = r"(`benchrun resume [^`]+` goes on with it\.\n)?"
EVERY = bool(os.environ.get("BENCHRUN_EVERY_EXCHANGE"))
#: More than the writes and syncs of the recipe; those beyond its end do nothing.
MOST = 130
Rehearse = Callable[[FailingDisk], Ended]


@pytest.fixture
def rehearse(
    benchrun_command: Callable[..., Ended], recipes: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> Rehearse:
    """Rehearse the small recipe with its archive on a failing disk."""
    (recipes / "small.recipe.yaml").write_text(RECIPE)
    create = ArchiveWriter.create

    def run(disk: FailingDisk) -> Ended:
        def on_disk(folder: Path, meta: Any) -> ArchiveWriter:
            return create(folder, meta, vfs=disk.name)

        monkeypatch.setattr(ArchiveWriter, "create", on_disk)
        return benchrun_command("rehearse", recipes / "small.recipe.yaml", "--to", tmp_path / "runs")

    return run


def last_message(ended: Ended) -> str:
    """Return what was said behind the progress."""
    return re.split(r"(?m)^(?:bring-(?:up|down) .*|Simulated instruments.*)\n", ended.err)[-1]


@pytest.mark.parametrize("n", range(0, MOST, 1 if EVERY else 9))
def test_the_disk_fills_at_its_write_n(rehearse: Rehearse, worlds: Worlds, tmp_path: Path, n: int) -> None:
    disk = FailingDisk(n)
    ended = rehearse(disk)
    (folder,) = (tmp_path / "runs").iterdir()
    assert ended.out.splitlines()[-1] == str(folder)
    if disk.operations <= n:
        assert ended.code == 0
        return
    assert ended.code == 5
    assert worlds.untouched or complaints(worlds.last) == []
    require_told(ended, folder)


def require_told(ended: Ended, folder: Path) -> None:
    """What is full, how many readings are safe, what to do; and either nothing was touched or the bench is safe."""
    path = re.escape(str(folder / "archive.sqlite"))
    full = r"the disk is full\. (\d) readings are safe in it\. Make room or mend the disk\."
    told = re.match(
        rf"(?:\d\d:\d\d:\d\d  )?{path}: could not be written \(.+\): {full}(.*)", last_message(ended), re.DOTALL
    )
    assert told is not None, ended.err
    try:
        with open_archive(folder) as archive:
            assert archive.check() == []
            assert archive.count == archive.count_all
            assert archive.count - int(told[1]) in (0, 1)  # one more where it was written, and only its sync failed
    except FolderError:
        assert int(told[1]) == 0
    derived = rf" Then `benchrun derive {re.escape(str(folder))}` makes the results\.\n"
    made_safe = r"\nMade safe: sources off, drain off \(\d\.\d V read back\), gate released: confirmed\.\n"
    counted = rf"({told[1]} of {READINGS} readings are safe in {path}\.\n)?" + RESUME
    assert re.fullmatch(rf" Nothing was switched on\.\n|{derived}|{made_safe}{counted}", told[2]), told[2]


@pytest.fixture
def small_disk(tmp_path: Path) -> Iterator[Path]:
    """A file system of its own that is really full soon."""
    place = tmp_path / "disk"
    place.mkdir()
    mount = shutil.which("mount")
    if mount is None or os.name != "posix" or os.geteuid() != 0:
        pytest.skip("only root can mount a file system")
    made = subprocess.run([mount, "-t", "tmpfs", "-o", "size=180k", "tmpfs", place], capture_output=True, check=False)
    if made.returncode:
        pytest.skip("no file system can be mounted here")
    yield place
    subprocess.run(["umount", place], check=True)


def test_a_disk_that_is_really_full(
    benchrun_command: Callable[..., Ended], worlds: Worlds, recipes: Path, small_disk: Path
) -> None:
    long = RECIPE.replace("points: 2}", "points: 400}")
    (recipes / "small.recipe.yaml").write_text(long)
    ended = benchrun_command("rehearse", recipes / "small.recipe.yaml", "--to", small_disk / "runs")
    (folder,) = (small_disk / "runs").iterdir()
    assert ended.code == 5
    told = re.search(
        r"the disk is full\. (\d+) readings are safe in it\. Make room or mend the disk\.\nMade safe: ", ended.err
    )
    assert told is not None, ended.err
    assert complaints(worlds.last) == []
    assert "Traceback" not in ended.err
    with open_archive(folder) as archive:
        assert archive.check() == []
        assert archive.count == archive.count_all == int(told[1]) > 0


def fill(place: Path) -> None:
    """Leave no room on a file system."""
    handle = os.open(place / "ballast", os.O_WRONLY | os.O_CREAT)
    with contextlib.suppress(OSError):
        while os.write(handle, bytes(4096)):
            pass
    os.close(handle)


def test_no_room_even_for_the_files_as_run(
    benchrun_command: Callable[..., Ended], worlds: Worlds, recipes: Path, small_disk: Path
) -> None:
    (recipes / "small.recipe.yaml").write_text(RECIPE)
    fill(small_disk)
    ended = benchrun_command("rehearse", recipes / "small.recipe.yaml", "--to", small_disk / "runs")
    assert ended.code == 5
    assert "No space left on device" in ended.err
    assert "Nothing was switched on." in ended.err
    assert "Traceback" not in ended.err
    assert worlds.untouched


def test_what_is_written_after_the_disk_has_room_again(rehearse: Rehearse, worlds: Worlds, tmp_path: Path) -> None:
    """A disk that fails once ends the run all the same: one reading is not made up for by the next."""
    ended = rehearse(FailingDisk(44, stays=False))
    (folder,) = (tmp_path / "runs").iterdir()
    assert ended.code == 5
    assert complaints(worlds.last) == []
    with open_archive(folder) as archive:
        assert archive.meta.state == "failed"
        assert [event.kind for event in archive.log()][-2:] == ["failure", "safe-state"]
