"""Recovering a damaged archive: all that can be read comes back to the last bit, nothing that was changed does."""

from __future__ import annotations

import shutil
import sqlite3
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import apsw
import numpy as np
import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from benchrun.archive import ArchiveWriter, Event, open_archive
from benchrun.archive.repair import Repaired, gaps_between, repair
from benchrun.contract.reading import Reading
from benchrun.errors import BenchrunError, FolderError
from tests.archive.readings import META, reading, same

READINGS, PAGE = 40, 4096
#: Readings of one point are of about 400 bytes.
MOST_ON_A_PAGE = 11


@pytest.fixture(scope="module")
def sound(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A run of 40 readings, one of them twice, and some that are longer than a page; with products and events."""
    folder = tmp_path_factory.mktemp("sound") / "run"
    with ArchiveWriter.create(folder, replace(META, readings_planned=READINGS)) as writer:
        for one in all_readings():
            writer.commit(one)
        writer.product("calibration", "output-plane", {"kind": "calibration", "terms": [0.1] * 900})
        writer.log(Event("operator", "connected the open", {"answer": "proceed"}, 7))
        writer.close("complete")
    return folder


def all_readings() -> list[Reading]:
    found = [reading(index) for index in range(READINGS)]
    found.append(reading(3, attempt=1, flags=("over-limit:reflected",)))
    for index in (10, 30):
        points = tuple((2.2e9 + np.arange(101) * 1e6).tolist())
        data = np.random.default_rng(index).normal(size=(3, 2, 101, 2)).view(np.complex128)[..., 0]
        found[index] = reading(index, frequencies_hz=points, data=data)
    return found


def key(one: Reading) -> tuple[int, str, int]:
    return one.index, one.name, one.attempt


ORIGINAL = {key(one): one for one in all_readings()}


def damaged(sound: Path, place: Path, damage: Callable[[bytearray], None]) -> Path:
    """Return a copy of the archive file, damaged."""
    folder = Path(shutil.copytree(sound, place / "run"))
    file = folder / "archive.sqlite"
    content = bytearray(file.read_bytes())
    damage(content)
    file.write_bytes(content)
    return file


def wiped(place: slice) -> Callable[[bytearray], None]:
    """Return a damage: zeros in place of what was there."""
    return lambda content: content.__setitem__(place, bytes(place.stop - place.start))


def recovered(file: Path) -> Repaired:
    """Repair an archive; whatever comes back is what was written, and the old file is as it was."""
    before = file.read_bytes()
    names = sorted(path.name for path in file.parent.iterdir())
    repaired = repair(file, file.parent.with_name("repaired"))
    assert file.read_bytes() == before
    assert sorted(path.name for path in file.parent.iterdir()) == names
    with open_archive(repaired.folder) as archive:
        assert archive.check() == []
        found = list(archive.readings(every_attempt=True))
        assert archive.count_all == len(found) == repaired.readings
    for one in found:
        assert same(one, ORIGINAL[key(one)])
    return repaired


def test_a_sound_archive_comes_back_whole(sound: Path, tmp_path: Path) -> None:
    repaired = recovered(damaged(sound, tmp_path, lambda _content: None))
    assert (repaired.readings, repaired.planned, repaired.lost) == (READINGS + 1, READINGS, ())
    with open_archive(sound) as one, open_archive(repaired.folder) as other:
        assert other.digest() == one.digest()
        assert other.meta == one.meta
        assert other.products() == one.products()
        assert other.log()[:-1] == one.log()
        assert other.log()[-1].kind == "repair"


def pages(sound: Path) -> int:
    return len((sound / "archive.sqlite").read_bytes()) // PAGE


def test_every_page_lost_in_turn_costs_no_more_than_what_stood_on_it(sound: Path, tmp_path: Path) -> None:
    """The first is SQLite's own and costs nothing; the one with the axes costs the readings, and that is said."""
    bare, lost_everything = 0, 0
    for page in range(pages(sound)):
        gone_at = slice(page * PAGE, (page + 1) * PAGE)
        file = damaged(sound, tmp_path / str(page), wiped(gone_at))
        repaired = recovered(file)
        if repaired.readings == 0:
            lost_everything += 1
            assert repaired.lost
        else:
            gone = READINGS + 1 - repaired.readings
            assert gone <= MOST_ON_A_PAGE
            assert gone == 0 or repaired.lost
            bare += gone == 0
    assert lost_everything <= 1
    assert bare > 3


@pytest.mark.parametrize("spoilt", ["first page", "header", "page size"])
def test_a_spoilt_beginning_costs_nothing(sound: Path, tmp_path: Path, spoilt: str) -> None:
    place = {"first page": slice(0, PAGE), "header": slice(0, 100), "page size": slice(16, 18)}[spoilt]
    size = place.stop - place.start
    file = damaged(sound, tmp_path, lambda content: content.__setitem__(place, b"\x5a" * size))
    with pytest.raises(FolderError):
        open_archive(file).close()
    repaired = recovered(file)
    assert (repaired.readings, repaired.lost) == (READINGS + 1, ())


def test_a_changed_number_is_left_out_and_named(sound: Path, tmp_path: Path) -> None:
    with open_archive(sound) as archive:
        wanted = next(one for one in archive.readings() if one.index == 17).data.tobytes()

    def change(content: bytearray) -> None:
        at = content.index(wanted) + 5
        content[at] ^= 1

    repaired = recovered(damaged(sound, tmp_path, change))
    assert repaired.readings == READINGS
    assert any("1 reading" in text and text.endswith(": 17") for text in repaired.lost)


@pytest.mark.parametrize("part", [0.75, 0.85, 0.95])
def test_a_file_that_was_cut_short(sound: Path, tmp_path: Path, part: float) -> None:
    def cut(content: bytearray) -> None:
        del content[round(len(content) * part) :]

    repaired = recovered(damaged(sound, tmp_path, cut))
    assert 0 < repaired.readings < READINGS + 1
    assert repaired.lost


def test_of_a_file_that_is_cut_before_its_tables_nothing_is_left(sound: Path, tmp_path: Path) -> None:
    file = damaged(sound, tmp_path, lambda content: content.__delitem__(slice(PAGE, None)))
    with pytest.raises(FolderError, match="Look for a copy"):
        repair(file, tmp_path / "repaired")
    assert not (tmp_path / "repaired").exists()


def test_what_a_killed_process_left_beside_the_file_is_taken_in(sound: Path, tmp_path: Path) -> None:
    folder = tmp_path / "live"
    writer = ArchiveWriter.create(folder, replace(META, readings_planned=READINGS))
    for one in all_readings():
        writer.commit(one)
    killed = Path(shutil.copytree(folder, tmp_path / "killed"))
    writer.close("complete")
    assert (killed / "archive.sqlite-wal").stat().st_size > 0
    repaired = recovered(killed / "archive.sqlite")
    assert repaired.readings == READINGS + 1
    with open_archive(repaired.folder) as archive:
        assert archive.meta.state == "running"


def test_lost_words_about_the_run_are_made_up_for_by_the_files_beside(sound: Path, tmp_path: Path) -> None:
    file = damaged(sound, tmp_path, lambda _content: None)
    with sqlite3.connect(file) as connection:
        connection.execute("DELETE FROM meta WHERE key IN ('files', 'recipe', 'bench', 'state', 'title')")
    connection.close()
    for name, text in META.files.items():
        (file.parent / name).write_bytes(text.encode())
    repaired = recovered(file)
    assert sorted(repaired.lost) == [
        f"what the run says of its {word}" for word in ("bench", "files", "recipe", "state", "title")
    ]
    with open_archive(repaired.folder) as archive:
        meta = archive.meta
    assert (meta.files, meta.recipe, meta.bench, meta.state) == (META.files, META.recipe, META.bench, "failed")


def test_missing_readings_are_named_but_those_that_were_passed_over(tmp_path: Path) -> None:
    folder = tmp_path / "run"
    with ArchiveWriter.create(folder, replace(META, readings_planned=20)) as writer:
        for index in (0, 1, 5, 6, 12):
            writer.commit(reading(index))
        writer.log(Event("skipped", "3 readings were skipped by the operator", {"first": 2, "last": 4}))
    repaired = repair(folder / "archive.sqlite", tmp_path / "repaired")
    assert repaired.lost == (
        "5 readings, if they were taken: 7-11",
        "readings from 13 to 19, as far as they had been committed",
    )


def test_what_is_no_archive_is_refused(tmp_path: Path) -> None:
    foreign, text, empty = (tmp_path / name for name in ("foreign.sqlite", "text.sqlite", "empty.sqlite"))
    with sqlite3.connect(foreign) as connection:
        connection.execute("CREATE TABLE contact (name TEXT)")
    connection.close()
    text.write_text("no database at all\n" * 1000)
    empty.write_bytes(b"")
    for number, file in enumerate((foreign, text, empty)):
        before = file.read_bytes()
        with pytest.raises(FolderError, match="Look for a copy"):
            repair(file, tmp_path / str(number))
        assert file.read_bytes() == before
        assert not (tmp_path / str(number)).exists()


def test_nothing_is_overwritten(sound: Path, tmp_path: Path) -> None:
    there = Path(shutil.copytree(sound, tmp_path / "there"))
    before = (there / "archive.sqlite").read_bytes()
    with pytest.raises(FolderError, match="none is overwritten"):
        repair(sound / "archive.sqlite", there)
    assert (there / "archive.sqlite").read_bytes() == before


@settings(max_examples=25, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(st.lists(st.tuples(st.floats(0.0, 1.0), st.binary(min_size=1, max_size=300)), min_size=1, max_size=6))
def test_whatever_is_written_over_it_only_what_was_read_comes_back(
    sound: Path, tmp_path_factory: pytest.TempPathFactory, spots: list[tuple[float, bytes]]
) -> None:
    def spoil(content: bytearray) -> None:
        for where, junk in spots:
            at = int(where * (len(content) - len(junk)))
            content[at : at + len(junk)] = junk

    file = damaged(sound, tmp_path_factory.mktemp("spoilt"), spoil)
    try:
        recovered(file)
    except BenchrunError as error:
        assert "Look for a copy" in str(error)  # noqa: PT017  it need not fail


def test_gaps() -> None:
    assert gaps_between([]) == ([], 0)
    assert gaps_between([(0, 0), (2, 2), (1, 1)]) == ([], 3)
    assert gaps_between([(4, 4), (1, 2), (9, 9), (2, 5)]) == ([(0, 0), (6, 8)], 10)


def test_an_earlier_attempt_that_is_lost_is_said(sound: Path, tmp_path: Path) -> None:
    def change(content: bytearray) -> None:
        flag = b'["over-limit:reflected"]'
        assert content.count(flag) == 1
        content[content.index(flag) + 3] ^= 1

    file = damaged(sound, tmp_path, change)
    with sqlite3.connect(file) as connection:  # so that it is not the last row
        connection.execute("UPDATE reading SET rowid = 1000 WHERE schedule_index = 39")
        connection.execute("UPDATE reading SET rowid = 40 WHERE attempt = 1")
        connection.execute("UPDATE reading SET rowid = 41 WHERE schedule_index = 39")
    connection.close()
    repaired = recovered(file)
    assert (repaired.readings, repaired.lost) == (READINGS, ("1 attempts at readings that were tried again",))


@pytest.mark.parametrize("detail", ['{"first": 2}', '{"first": "x", "last": 3}', '{"first": 0, "last": null}'])
def test_events_and_words_about_the_run_that_make_no_sense(sound: Path, tmp_path: Path, detail: str) -> None:
    file = damaged(sound, tmp_path, lambda _content: None)
    with sqlite3.connect(file) as connection:
        connection.execute("UPDATE event SET kind = 'skipped', detail = ?", (detail,))
        connection.execute("""UPDATE meta SET value = '"many"' WHERE key = 'readings_planned'""")
        connection.execute("UPDATE meta SET value = '[1, 2]' WHERE key = 'title'")
    connection.close()
    repaired = recovered(file)
    assert (repaired.readings, repaired.planned) == (READINGS + 1, READINGS)
    assert sorted(repaired.lost) == ["what the run says of its readings planned", "what the run says of its title"]


def test_the_page_size_is_that_of_the_archives(sound: Path) -> None:
    with open_archive(sound):
        connection = apsw.Connection(str(sound / "archive.sqlite"), flags=apsw.SQLITE_OPEN_READONLY)
    assert connection.execute("PRAGMA page_size").get == PAGE
    connection.close()
