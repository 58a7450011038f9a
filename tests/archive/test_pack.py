"""A run in one file: everything in it, checked by SHA-256; whatever is changed in it afterwards is found."""

from __future__ import annotations

import hashlib
import json
import shutil
import zipfile
from collections.abc import Callable
from pathlib import Path

import pytest
from hypothesis import HealthCheck, given, settings
from hypothesis import strategies as st

from benchrun.archive import ArchiveWriter, open_archive
from benchrun.archive.pack import check_pack, pack
from benchrun.errors import FolderError
from tests.archive.readings import META, reading


@pytest.fixture(scope="module")
def run(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A run with results. Change nothing in it."""
    folder = tmp_path_factory.mktemp("pack") / "2026-12-01_0042_hot"
    with ArchiveWriter.create(folder, META) as writer:
        for index in range(5):
            writer.commit(reading(index))
        writer.close("complete")
    (folder / "summary.csv").write_text("drive_dbm\n14\n", "utf-8")
    (folder / "touchstone").mkdir()
    (folder / "touchstone" / "0042_S22.s1p").write_text("# Hz S RI R 50\n", "utf-8")
    (folder / ".hidden").write_text("no", "utf-8")
    return folder


@pytest.fixture(scope="module")
def packed(run: Path) -> Path:
    """The same in one file. Change nothing in it."""
    return pack(run, run.parent / "hand-on.zip")


def content(path: Path) -> dict[str, bytes]:
    with zipfile.ZipFile(path) as file:
        return {name: file.read(name) for name in file.namelist()}


def test_archive_results_and_a_manifest_with_the_sha_256_of_each(run: Path, packed: Path) -> None:
    found = content(packed)
    manifest = json.loads(found.pop(f"{run.name}/manifest.json"))
    assert sorted(found) == [
        f"{run.name}/{name}" for name in ("archive.sqlite", "summary.csv", "touchstone/0042_S22.s1p")
    ]
    assert {one["name"]: (one["bytes"], one["sha256"]) for one in manifest["files"]} == {
        name: (len(data), hashlib.sha256(data).hexdigest()) for name, data in found.items()
    }
    with open_archive(run) as archive:
        assert manifest["digest"] == archive.digest()
        assert (manifest["readings"], manifest["state"]) == (5, "complete")
    assert check_pack(packed) == []


def test_unpacked_it_is_a_run_folder_again(run: Path, packed: Path, tmp_path: Path) -> None:
    shutil.unpack_archive(packed, tmp_path)
    with open_archive(run) as one, open_archive(tmp_path / run.name) as other:
        assert other.check() == []
        assert other.digest() == one.digest()
        assert other.meta == one.meta


def test_what_a_killed_process_left_beside_the_archive_is_in_it(tmp_path: Path) -> None:
    live = tmp_path / "live"
    with ArchiveWriter.create(live, META) as writer:
        for index in range(4):
            writer.commit(reading(index))
        killed = Path(shutil.copytree(live, tmp_path / "killed"))
    assert (killed / "archive.sqlite-wal").stat().st_size > 0
    target = pack(killed, tmp_path / "one.zip")
    assert check_pack(target) == []
    assert sorted(content(target)) == ["killed/archive.sqlite", "killed/manifest.json"]
    shutil.unpack_archive(target, tmp_path / "there")
    with open_archive(tmp_path / "there" / "killed") as archive:
        assert archive.count == 4


def test_nothing_is_overwritten(run: Path, tmp_path: Path) -> None:
    target = tmp_path / "there.zip"
    target.write_bytes(b"mine")
    with pytest.raises(FolderError, match="nothing is overwritten"):
        pack(run, target)
    assert target.read_bytes() == b"mine"
    assert list(tmp_path.iterdir()) == [target]


def test_into_the_run_folder_itself(run: Path, tmp_path: Path) -> None:
    own = Path(shutil.copytree(run, tmp_path / "own"))
    target = pack(own, own / "own.zip")
    assert check_pack(target) == []
    assert "own/own.zip" not in content(target)


def test_a_damaged_archive_is_not_handed_on(run: Path, tmp_path: Path) -> None:
    broken = Path(shutil.copytree(run, tmp_path / "broken"))
    file = broken / "archive.sqlite"
    with open_archive(run) as archive:
        wanted = next(archive.readings()).data.tobytes()
    data = bytearray(file.read_bytes())
    data[data.index(wanted)] ^= 1
    file.write_bytes(data)
    with pytest.raises(FolderError, match="archive repair"):
        pack(broken, tmp_path / "broken.zip")
    assert not (tmp_path / "broken.zip").exists()


def test_a_place_that_cannot_be_written(run: Path, tmp_path: Path) -> None:
    from benchrun.errors import DiskError

    (tmp_path / "file").write_text("no folder", "utf-8")
    with pytest.raises(DiskError, match="Choose another place"):
        pack(run, tmp_path / "file" / "one.zip")


def rewritten(packed: Path, target: Path, change: Callable[[dict[str, bytes]], None]) -> list[str]:
    """Return what is wrong with a pack whose content was changed."""
    found = content(packed)
    change(found)
    with zipfile.ZipFile(target, "w") as file:
        for name, data in found.items():
            file.writestr(name, data)
    return check_pack(target)


def test_a_file_that_was_changed_is_named(run: Path, packed: Path, tmp_path: Path) -> None:
    name = f"{run.name}/summary.csv"
    (problem,) = rewritten(packed, tmp_path / "x.zip", lambda found: found.update({name: b"drive_dbm\n15\n"}))
    assert name in problem
    assert "changed after it was packed" in problem


def test_a_file_that_is_gone_and_one_that_came_are_named(run: Path, packed: Path, tmp_path: Path) -> None:
    def change(found: dict[str, bytes]) -> None:
        del found[f"{run.name}/summary.csv"]
        found[f"{run.name}/virus.exe"] = b"MZ"

    problems = rewritten(packed, tmp_path / "x.zip", change)
    assert problems == [
        f"{run.name}/virus.exe is in it, and not in its manifest",
        f"{run.name}/summary.csv is in its manifest, and not in it",
    ]


def test_an_archive_that_was_changed_with_its_sum_is_found(run: Path, packed: Path, tmp_path: Path) -> None:
    """Whoever changes a reading and the manifest has still not changed the reading's own checksum."""
    name = f"{run.name}/archive.sqlite"
    with open_archive(run) as archive:
        wanted = next(archive.readings()).data.tobytes()

    def change(found: dict[str, bytes]) -> None:
        data = bytearray(found[name])
        data[data.index(wanted)] ^= 1
        manifest = json.loads(found[f"{run.name}/manifest.json"])
        for record in manifest["files"]:
            if record["name"] == name:
                record["sha256"] = hashlib.sha256(data).hexdigest()
        found[name] = bytes(data)
        found[f"{run.name}/manifest.json"] = json.dumps(manifest).encode()

    (problem,) = rewritten(packed, tmp_path / "x.zip", change)
    assert "its checksum does not fit" in problem


@pytest.mark.parametrize(
    "manifest", [None, b"", b"[]", b"{}", b'{"benchrun-pack": 1}', b'{"benchrun-pack": 1, "files": [3]}', b"[" * 90_000]
)
def test_a_manifest_that_is_none(run: Path, packed: Path, tmp_path: Path, manifest: bytes | None) -> None:
    def change(found: dict[str, bytes]) -> None:
        del found[f"{run.name}/manifest.json"]
        if manifest is not None:
            found[f"{run.name}/manifest.json"] = manifest

    (problem,) = rewritten(packed, tmp_path / "x.zip", change)
    assert "manifest.json" in problem


def test_a_later_form_is_refused(run: Path, packed: Path, tmp_path: Path) -> None:
    def change(found: dict[str, bytes]) -> None:
        manifest = json.loads(found[f"{run.name}/manifest.json"])
        found[f"{run.name}/manifest.json"] = json.dumps({**manifest, "benchrun-pack": 2}).encode()

    (problem,) = rewritten(packed, tmp_path / "x.zip", change)
    assert "later benchrun" in problem


def test_there_is_none(tmp_path: Path) -> None:
    with pytest.raises(FolderError):
        check_pack(tmp_path / "none.zip")


@settings(max_examples=60, deadline=None, suppress_health_check=[HealthCheck.function_scoped_fixture])
@given(st.floats(0.0, 1.0, exclude_max=True), st.integers(1, 255), st.booleans())
def test_a_byte_that_was_changed_or_an_end_that_is_missing(
    packed: Path, tmp_path_factory: pytest.TempPathFactory, where: float, by: int, cut: bool
) -> None:
    """A sound answer is only given where everything that the manifest names is there to the last byte."""
    data = bytearray(packed.read_bytes())
    at = int(where * len(data))
    if cut:
        del data[at:]
    else:
        data[at] ^= by
    spoilt = tmp_path_factory.mktemp("spoilt") / "x.zip"
    spoilt.write_bytes(data)
    if not check_pack(spoilt):
        assert not cut
        assert {**content(spoilt), "manifest": b""} == {**content(packed), "manifest": b""}
