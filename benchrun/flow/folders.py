"""Run folders: where they are, what they are called, what stands in them."""

from __future__ import annotations

import datetime
import errno
import re
from pathlib import Path

from benchrun.errors import DiskError, FolderError

ARCHIVE = "archive.sqlite"
_UNSAFE = re.compile(r"[^A-Za-z0-9.-]+")


def slug(text: str) -> str:
    """Return `text` as a part of a file name: letters, digits, points and hyphens only, never hidden, never empty."""
    return _UNSAFE.sub("-", text).strip("-.") or "unnamed"


def make_run_folder(runs: Path, serial: str | None, recipe_name: str, today: datetime.date | None = None) -> Path:
    """Make and return a new folder `{date}_{serial}_{recipe}` below `runs`; a number is added where it exists.

    Raises FolderError where it may not be made, DiskError where the disk is full or fails.
    """
    day = (today or datetime.date.today()).isoformat()
    stem = "_".join(slug(part) for part in (day, serial or "bench", recipe_name))
    try:
        runs.mkdir(parents=True, exist_ok=True)
        return _first_free(runs, stem)
    except OSError as error:
        reason = "it is a file" if runs.is_file() else error.strerror or error
        kind = DiskError if error.errno in (errno.ENOSPC, errno.EDQUOT, errno.EIO) else FolderError
        raise kind(
            f"{runs}: no run folder can be made here ({reason}). Nothing was switched on. "
            "Choose a folder that you may write to with --to."
        ) from error


def _first_free(runs: Path, stem: str) -> Path:
    for number in range(1, 10_000):
        folder = runs / (stem if number == 1 else f"{stem}-{number}")
        try:
            folder.mkdir()
        except FileExistsError:
            continue
        return folder
    raise FolderError(f"{runs}: there are already 9999 runs called {stem}. Choose another folder with --to.")


def run_folders(runs: Path) -> list[Path]:
    """Return the folders below `runs` that hold an archive, oldest name first; [] where `runs` does not exist."""
    if not runs.is_dir():
        return []
    return sorted(folder for folder in runs.iterdir() if (folder / ARCHIVE).is_file())


def require_run(run: Path) -> Path:
    """Return the run folder meant by `run` (a folder or its archive file). Raises FolderError where there is none."""
    folder = run.parent if run.name == ARCHIVE else run
    if not (folder / ARCHIVE).is_file():
        raise FolderError(
            f"{run}: there is no run here. A run folder holds {ARCHIVE}; `benchrun run` and `rehearse` name it last."
        )
    return folder
