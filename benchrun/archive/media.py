"""Where an archive lies: network file systems, media that cannot be written, and the one writer of a folder."""

from __future__ import annotations

import os
import sys
import tempfile
from pathlib import Path

from benchrun.errors import DiskError, FolderError

#: File system types (Linux's /proc/self/mountinfo) whose locks cannot be trusted between machines.
NETWORK_TYPES = frozenset({
    "9p", "afs", "beegfs", "ceph", "cifs", "coda", "davfs", "fuse.davfs", "fuse.glusterfs", "fuse.rclone", "fuse.s3fs",
    "fuse.sshfs", "gfs2", "glusterfs", "gpfs", "lustre", "ncpfs", "nfs", "nfs4", "ocfs2", "orangefs", "smb3", "smbfs",
})  # fmt: skip
MOUNTS = Path("/proc/self/mountinfo")


def refuse_network(folder: Path) -> None:
    """Raise FolderError where `folder` is seen to lie on another machine: SQLite's locks do not hold there."""
    kind = network_kind(folder)
    if kind:
        raise FolderError(
            f"{folder}: lies on a network file system ({kind}), where a reading could be lost when the network is. "
            "Choose a folder on a local disk with --to, and copy the run when it is done"
        )


def network_kind(folder: Path) -> str:
    """Return what kind of network file system a folder lies on, "" for none that can be seen."""
    if sys.platform == "win32":
        return _windows_kind(folder)
    try:
        mounts = MOUNTS.read_text(encoding="utf-8", errors="surrogateescape")
    except OSError:
        return ""
    kind = _mounted_kind(mounts, folder.resolve())
    return kind if kind in NETWORK_TYPES else ""


def _mounted_kind(mounts: str, folder: Path) -> str:
    """Return the type of the file system that holds a folder; a later mount covers an earlier one (proc(5))."""
    best, kind = -1, ""
    for line in mounts.splitlines():
        before, _, after = line.partition(" - ")
        point = Path(before.split(" ")[4].encode("ascii", "surrogateescape").decode("unicode_escape"))
        if len(point.parts) >= best and folder.is_relative_to(point):
            best, kind = len(point.parts), after.split(" ")[0]
    return kind


def _windows_kind(folder: Path) -> str:
    if sys.platform == "win32":  # pragma: no cover  only there
        import ctypes

        drive = folder.resolve().drive
        remote = drive.startswith("\\\\") or ctypes.windll.kernel32.GetDriveTypeW(f"{drive}\\") == 4
        return "a network drive" if remote else ""
    return ""


def writable(folder: Path) -> bool:
    """Whether files can be made in a folder (asked of the disk itself: permissions alone do not say)."""
    try:
        with tempfile.TemporaryFile(dir=folder, prefix=".benchrun-"):
            return True
    except OSError:
        return False


class WriterLock:
    """Held by the one writer of a folder. The operating system lets it go when the process ends, however it ends."""

    def __init__(self, folder: Path) -> None:
        """Take the lock. Raises FolderError where another process writes there, DiskError where it cannot be taken."""
        self._handle = -1
        try:
            self._handle = _take(folder)
        except BlockingIOError:
            raise FolderError(
                f"{folder}: another benchrun writes to this run. Wait for it, or stop it with Ctrl-C there"
            ) from None
        except OSError as error:
            raise DiskError(
                f"{folder}: cannot be written ({error.strerror or error}). Choose another folder with --to"
            ) from error

    def release(self) -> None:
        """Let go; twice does no harm."""
        if self._handle >= 0:
            os.close(self._handle)
            self._handle = -1


if sys.platform == "win32":  # pragma: no cover  only there

    def _take(folder: Path) -> int:
        """Hold a file that vanishes with its holder."""
        flags = os.O_CREAT | os.O_EXCL | os.O_RDWR | os.O_TEMPORARY
        try:
            return os.open(folder / ".archive-writer", flags)
        except (FileExistsError, PermissionError) as error:
            raise BlockingIOError(str(error)) from error

else:
    import fcntl

    def _take(folder: Path) -> int:
        """Hold the folder itself: no file is left behind."""
        handle = os.open(folder, os.O_RDONLY)
        try:
            fcntl.flock(handle, fcntl.LOCK_EX | fcntl.LOCK_NB)
        except BaseException:
            os.close(handle)
            raise
        return handle
