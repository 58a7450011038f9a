"""The writer: one at a time, each key once, readers beside it, and one file in the end."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import apsw
import pytest

from benchrun.archive import ArchiveWriter, Event, open_archive
from benchrun.errors import FolderError
from tests.archive.readings import META, reading, same

OTHER_WRITER = """
import sys
from pathlib import Path
from benchrun.archive import ArchiveWriter
from benchrun.errors import FolderError
try:
    ArchiveWriter.append(Path(sys.argv[1]))
except FolderError as error:
    print(error)
"""


def test_the_folder_is_made(tmp_path: Path) -> None:
    folder = tmp_path / "runs" / "2026-12-01"
    ArchiveWriter.create(folder, META).close()
    assert [file.name for file in folder.iterdir()] == ["archive.sqlite"]


def test_an_archive_is_never_overwritten(tmp_path: Path) -> None:
    with ArchiveWriter.create(tmp_path, META) as writer:
        writer.commit(reading())
    with pytest.raises(FolderError, match="there is an archive already"):
        ArchiveWriter.create(tmp_path, META)
    with open_archive(tmp_path) as reader:
        assert reader.count == 1


def test_a_second_writer_is_refused_here_and_elsewhere(tmp_path: Path) -> None:
    writer = ArchiveWriter.create(tmp_path, META)
    with pytest.raises(FolderError, match="another benchrun writes"):
        ArchiveWriter.append(tmp_path)
    with pytest.raises(FolderError, match="another benchrun writes"):
        ArchiveWriter.create(tmp_path, META)
    elsewhere = subprocess.run(
        [sys.executable, "-c", OTHER_WRITER, str(tmp_path)], check=True, capture_output=True, text=True
    )
    assert "another benchrun writes" in elsewhere.stdout
    writer.close()
    ArchiveWriter.append(tmp_path).close()


def test_the_same_key_twice_is_a_defect_and_the_first_stays(tmp_path: Path) -> None:
    first = reading(4)
    with ArchiveWriter.create(tmp_path, META) as writer:
        writer.commit(first)
        with pytest.raises(RuntimeError, match="reading 4 'hot' was committed before"):
            writer.commit(reading(4, conditions={"drive_dbm": 99.0}))
        writer.commit(reading(4, attempt=1))
        writer.commit(reading(4, name="cold"))
        assert writer.readings == 3
    with open_archive(tmp_path) as reader:
        found = list(reader.readings("hot", every_attempt=True))
        assert same(found[0], first)
        assert len(found) == 2


def test_the_rules_of_the_file_while_running(tmp_path: Path) -> None:
    with ArchiveWriter.create(tmp_path, META) as writer:
        pragma = {word: writer._connection.pragma(word) for word in ("journal_mode", "synchronous", "foreign_keys")}
        assert pragma == {"journal_mode": "wal", "synchronous": 2, "foreign_keys": 1}
        with pytest.raises(apsw.ConstraintError):
            writer._connection.execute("INSERT INTO event VALUES (1, 'k', 'text', 'no json', 0, '')")
        with pytest.raises(apsw.ConstraintError):
            writer._connection.execute("INSERT INTO event VALUES (1, 'k', 'text', '{}', 'no number', '')")


def test_a_closed_archive_is_one_file_that_can_be_copied_alone(tmp_path: Path) -> None:
    writer = ArchiveWriter.create(tmp_path / "run", META)
    for k in range(20):
        writer.commit(reading(k))
    writer.close("complete")
    assert [file.name for file in (tmp_path / "run").iterdir()] == ["archive.sqlite"]
    copy = tmp_path / "copy.sqlite"
    copy.write_bytes((tmp_path / "run" / "archive.sqlite").read_bytes())
    with open_archive(copy) as reader:
        assert (reader.count, reader.check(), reader.meta.state) == (20, [], "complete")
        assert apsw.Connection(str(copy)).pragma("journal_mode") == "delete"


def test_two_readers_beside_the_writer_see_whole_readings(tmp_path: Path) -> None:
    with ArchiveWriter.create(tmp_path, META) as writer, open_archive(tmp_path) as one, open_archive(tmp_path) as other:
        for k in range(10):
            writer.commit(reading(k))
            assert one.count == other.count == k + 1
            assert one.check() == other.check() == []
            assert one.digest() == other.digest()
        half_way = one.readings()
        next(half_way)
        writer.commit(reading(10))
        assert sum(1 for _ in half_way) == 9  # a reader that has begun sees what there was
        assert one.count == 11


def test_closing_with_a_reader_in_the_way_loses_nothing(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr("benchrun.archive.write.PATIENCE_MS", 50)
    writer = ArchiveWriter.create(tmp_path, META)
    for k in range(5):
        writer.commit(reading(k))
    with open_archive(tmp_path) as reader:
        half_way = reader.readings()
        next(half_way)
        writer.close("complete")
        half_way.close()
        assert reader.meta.state == "complete"
    with open_archive(tmp_path) as reader:
        assert (reader.count, reader.check(), reader.meta.state) == (5, [], "complete")


def test_closing_twice_does_no_harm(tmp_path: Path) -> None:
    writer = ArchiveWriter.create(tmp_path, META)
    writer.close("stopped")
    writer.close("complete")
    with open_archive(tmp_path) as reader:
        assert reader.meta.state == "stopped"


def test_an_archive_that_was_not_closed_says_that_it_is_running(tmp_path: Path) -> None:
    with ArchiveWriter.create(tmp_path, META), open_archive(tmp_path) as reader:
        assert (reader.meta.state, reader.meta.ended_utc, reader.meta.result) == ("running", "", None)


def test_products_are_numbered_and_found_by_kind_and_name(tmp_path: Path) -> None:
    with ArchiveWriter.create(tmp_path, META) as writer:
        assert writer.product("calibration", "output-plane", {"terms": [1.5, 2.0], "plane": "output"}) == 1
        assert writer.product("levelling", "drive", {}) == 2
    with ArchiveWriter.append(tmp_path) as writer:
        assert writer.product("calibration", "output-plane", {"terms": []}) == 3
    with open_archive(tmp_path) as reader:
        assert [one.number for one in reader.products()] == [1, 2, 3]
        assert [one.number for one in reader.products("calibration")] == [1, 3]
        assert [one.number for one in reader.products(name="drive")] == [2]
        assert reader.products("calibration", "drive") == []
        first = reader.products()[0]
        assert (first.kind, first.name, first.document) == (
            "calibration",
            "output-plane",
            {"terms": [1.5, 2.0], "plane": "output"},
        )
        assert first.made_utc.endswith("+00:00")


def test_events_come_back_in_order(tmp_path: Path) -> None:
    exchanges = [{"time_ns": 5, "sent": "SOUR:POW?", "received": "", "error": "no answer"}]
    with ArchiveWriter.create(tmp_path, META) as writer:
        writer.log(Event("operator", "Connect OPEN", {"answer": "proceed"}, 7))
        writer.log(Event("exchanges", "pump", {"exchanges": exchanges}, 8, "2026-12-01T00:00:00+00:00"))
    with open_archive(tmp_path) as reader:
        first, second = reader.log()
        assert (first.kind, first.text, first.detail, first.at_ns) == (
            "operator",
            "Connect OPEN",
            {"answer": "proceed"},
            7,
        )
        assert first.at_utc.endswith("+00:00")
        assert second.detail["exchanges"] == exchanges
        assert second.at_utc == "2026-12-01T00:00:00+00:00"
        assert [one.text for one in reader.log("exchanges")] == ["pump"]


def test_meta_may_be_completed_later(tmp_path: Path) -> None:
    with ArchiveWriter.create(tmp_path, META) as writer:
        writer.update(identities={"pump": {"serial": "8"}}, result={"networks": 17})
        with pytest.raises(ValueError, match="no colour"):
            writer.update(colour="blue")
    with open_archive(tmp_path) as reader:
        assert reader.meta.identities == {"pump": {"serial": "8"}}
        assert reader.meta.result == {"networks": 17}
        assert reader.meta.operator == "somebody"


def test_a_run_that_ended_may_be_gone_on_with(tmp_path: Path) -> None:
    with ArchiveWriter.create(tmp_path, META) as writer:
        writer.commit(reading(0))
    with ArchiveWriter.append(tmp_path) as writer:
        assert writer.readings == 1
        writer.commit(reading(1))
        with pytest.raises(RuntimeError):
            writer.commit(reading(0))
    with open_archive(tmp_path) as reader:
        assert (reader.count, reader.check()) == (2, [])


def test_going_on_with_what_is_not_there(tmp_path: Path) -> None:
    with pytest.raises(FolderError, match="there is no run here"):
        ArchiveWriter.append(tmp_path)


def test_a_folder_that_cannot_be_made(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("")
    with pytest.raises(FolderError, match="cannot be made"):
        ArchiveWriter.create(tmp_path / "file" / "run", META)
