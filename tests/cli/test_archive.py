"""benchrun archive: what it prints and its exit codes, on archives that are there."""

from __future__ import annotations

import shutil
from collections.abc import Callable
from pathlib import Path

import pytest

from benchrun.archive import ArchiveWriter, open_archive
from tests.archive.readings import META, reading
from tests.cli.conftest import Ended


@pytest.fixture
def run(tmp_path: Path) -> Path:
    """A run of three readings out of a thousand."""
    folder = tmp_path / "runs" / "run"
    with ArchiveWriter.create(folder, META) as writer:
        for index in range(3):
            writer.commit(reading(index))
        writer.close("stopped")
    return folder


def spoil(run: Path) -> None:
    """Change one bit of the first reading."""
    file = run / "archive.sqlite"
    data = bytearray(file.read_bytes())
    data[data.index(reading(0).data.tobytes())] ^= 1
    file.write_bytes(data)


def test_a_sound_archive(run: Path, benchrun_command: Callable[..., Ended]) -> None:
    for named in (run, run / "archive.sqlite"):
        assert benchrun_command("archive", "check", named) == Ended(
            0, f"{named}: sound, 3 of 1000 readings, stopped.\n", ""
        )


def test_a_damaged_archive_and_its_recovery(run: Path, benchrun_command: Callable[..., Ended]) -> None:
    spoil(run)
    before = (run / "archive.sqlite").read_bytes()
    found = benchrun_command("archive", "check", run)
    assert (found.code, found.err) == (5, "")
    problem, count = found.out.splitlines()
    assert problem.startswith(f"{run}: reading 0 'hot' attempt 0: its checksum does not fit")
    assert count == "1 problem."
    repaired = benchrun_command("archive", "repair", run)
    assert (repaired.code, repaired.err) == (0, "")
    new = run.with_name("run-repaired")
    assert repaired.out.splitlines() == [
        "2 readings recovered; 1000 were planned.",
        "Lost: 1 reading, if it was taken: 0.",
        "Lost: readings from 3 to 999, as far as they had been committed.",
        str(new),
    ]
    assert (run / "archive.sqlite").read_bytes() == before
    assert benchrun_command("archive", "check", new).code == 0
    with open_archive(new) as archive:
        assert [one.index for one in archive.readings()] == [1, 2]
    again = benchrun_command("archive", "repair", run)
    assert again.out.splitlines()[-1] == str(run.with_name("run-repaired-2"))


def test_an_archive_that_cannot_be_opened(run: Path, benchrun_command: Callable[..., Ended]) -> None:
    file = run / "archive.sqlite"
    file.write_bytes(b"\0" * 4096 + file.read_bytes()[4096:])
    found = benchrun_command("archive", "check", run)
    assert found.code == 5
    assert "is no archive, or its beginning is damaged" in found.out
    repaired = benchrun_command("archive", "repair", run)
    assert repaired.out.startswith("3 readings recovered")


def test_one_file_to_hand_on(run: Path, tmp_path: Path, benchrun_command: Callable[..., Ended]) -> None:
    target = tmp_path / "hand-on.zip"
    assert benchrun_command("archive", "pack", run, "--to", target) == Ended(0, f"{target}\n", "")
    assert benchrun_command("archive", "check", target) == Ended(0, f"{target}: sound, a packed run.\n", "")
    again = benchrun_command("archive", "pack", run, "--to", target)
    assert again.code == 2
    assert "nothing is overwritten" in again.err
    target.write_bytes(target.read_bytes()[:-40])
    assert benchrun_command("archive", "check", target).code == 5


def test_a_run_that_was_moved_still_opens(run: Path, tmp_path: Path, benchrun_command: Callable[..., Ended]) -> None:
    moved = Path(shutil.move(run, tmp_path / "elsewhere"))
    assert benchrun_command("archive", "check", moved).code == 0
    assert benchrun_command("show", moved).code == 0


@pytest.mark.parametrize("what", ["check", "repair"])
def test_where_there_is_no_run(tmp_path: Path, benchrun_command: Callable[..., Ended], what: str) -> None:
    ended = benchrun_command("archive", what, tmp_path)
    assert ended.code == 2
    assert "there is no run here" in ended.err
