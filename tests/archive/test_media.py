"""Where archives may lie."""

from __future__ import annotations

from pathlib import Path

import pytest

from benchrun.archive import ArchiveWriter, media
from benchrun.errors import FolderError
from tests.archive.readings import META

# As proc(5) documents /proc/self/mountinfo: the fifth field is the mount point, the type follows the hyphen.
MOUNTS = """\
27 1 254:0 / / rw,relatime - ext4 /dev/vda rw
31 27 0:40 / {home} rw,nosuid shared:5 - nfs4 server:/home rw,vers=4.2
32 31 0:41 / {home}/fast rw - xfs /dev/nvme0n1 rw
33 27 0:42 / {home}/with\\040space rw - cifs //server/share rw
"""


@pytest.fixture
def home(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    mounts = tmp_path / "mountinfo"
    mounts.write_text(MOUNTS.format(home=tmp_path / "home"))
    monkeypatch.setattr(media, "MOUNTS", mounts)
    return tmp_path / "home"


@pytest.mark.parametrize(
    ("below", "kind"),
    [
        ("", "nfs4"),
        ("runs/new", "nfs4"),
        ("fast/runs", ""),
        ("faster", "nfs4"),
        ("with space/runs", "cifs"),
        ("..", ""),
    ],
)
def test_the_mount_that_holds_a_folder_decides(home: Path, below: str, kind: str) -> None:
    assert media.network_kind(home / below) == kind


def test_a_later_mount_covers_an_earlier_one(home: Path) -> None:
    with media.MOUNTS.open("a") as mounts:
        mounts.write(f"34 27 0:43 / {home} rw - btrfs /dev/vdb rw\n")
    assert media.network_kind(home / "runs") == ""


def test_network_file_systems_are_refused_before_anything_is_written(home: Path) -> None:
    with pytest.raises(FolderError, match=r"network file system \(nfs4\).*Choose a folder on a local disk"):
        ArchiveWriter.create(home / "run", META)
    assert list((home / "run").iterdir()) == []


def test_a_system_without_a_list_of_mounts(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(media, "MOUNTS", tmp_path / "absent")
    assert media.network_kind(tmp_path) == ""


def test_whether_a_folder_can_be_written(tmp_path: Path) -> None:
    assert media.writable(tmp_path)
    assert not media.writable(tmp_path / "absent")
    assert list(tmp_path.iterdir()) == []
