"""Files written whole or not at all, and names that stay inside their folder."""

from __future__ import annotations

import contextlib
import errno
import os
import re
import tempfile
from pathlib import Path

from benchrun.errors import DiskError, FolderError

_UNSAFE = re.compile(r"[^A-Za-z0-9.-]+")
_FULL = {errno.ENOSPC, errno.EDQUOT, errno.EIO, errno.EFBIG}


def safe_name(text: str) -> str:
    """Return `text` as a part of a file name: letters, digits, points and hyphens, no leading point, never empty.

    >>> safe_name("../0042 b")
    '0042-b'
    """
    return _UNSAFE.sub("-", text).strip("-.") or "unnamed"


def write_whole(path: Path, text: str, encoding: str = "utf-8") -> None:
    """Write `text` to `path` through a file beside it that then takes its place: nobody ever sees half a file.

    Raises DiskError where the disk is full or fails, FolderError where the folder may not be written.
    """
    temporary = ""
    try:
        path.parent.mkdir(parents=True, exist_ok=True)
        handle, temporary = tempfile.mkstemp(prefix=f".{path.name}.", dir=path.parent)
        with os.fdopen(handle, "w", encoding=encoding, newline="") as file:
            file.write(text)
            file.flush()
            os.fsync(file.fileno())
        Path(temporary).chmod(0o666 & ~_umask())
        Path(temporary).replace(path)
    except OSError as error:
        if temporary:
            with contextlib.suppress(OSError):
                Path(temporary).unlink()
        raise _refusal(path, error) from error


def _umask() -> int:
    """Return the process's mask for new files; reading it means setting it."""
    mask = os.umask(0o077)
    os.umask(mask)
    return mask


def _refusal(path: Path, error: OSError) -> DiskError | FolderError:
    reason = error.strerror or str(error)
    if error.errno in _FULL:
        return DiskError(
            f"{path}: could not be written ({reason}). The archive has all readings: make room and derive again."
        )
    return FolderError(
        f"{path}: could not be written ({reason}). Choose a folder that you may write to, and derive again."
    )
