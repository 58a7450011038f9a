"""Looking after archives: is one sound, what can be recovered of one that is not, and a run in one file to hand on."""

from __future__ import annotations

import zipfile
from dataclasses import dataclass
from pathlib import Path

from benchrun.archive import open_archive
from benchrun.archive.pack import check_pack, pack
from benchrun.archive.repair import Repaired, repair
from benchrun.errors import FolderError
from benchrun.flow.folders import ARCHIVE, require_run


@dataclass(frozen=True, slots=True)
class Soundness:
    """What is wrong with a run's archive, [] where it is sound; and what it holds, as far as that can be read."""

    problems: tuple[str, ...]
    holds: str = ""


def check_archive(run: Path) -> Soundness:
    """Return everything that is wrong with a run's archive, or with a packed run.

    Raises FolderError where there is neither.
    """
    if run.is_file() and (run.suffix == ".zip" or zipfile.is_zipfile(run)):
        return Soundness(tuple(check_pack(run)), "a packed run")
    folder = require_run(run)
    try:
        with open_archive(folder) as archive:
            if problems := archive.check():
                return Soundness(tuple(problems))
            meta = archive.meta
            return Soundness((), f"{archive.count} of {meta.readings_planned} readings, {meta.state}")
    except FolderError as error:
        return Soundness((str(error),))


def repair_archive(run: Path) -> Repaired:
    """Recover what can be read of a run's archive into a new run folder beside it. Raises FolderError, DiskError."""
    folder = require_run(run)
    return repair(folder / ARCHIVE, _free(folder))


def pack_run(run: Path, to: Path) -> Path:
    """Write a run, its archive and its results, to one new file. Raises FolderError, DiskError."""
    return pack(require_run(run), to)


def _free(folder: Path) -> Path:
    """Return the first of RUN-repaired, RUN-repaired-2, ... that is not there."""
    whole = folder if folder.name not in ("", "..") else folder.resolve()
    stem = whole.with_name(f"{whole.name}-repaired")
    names = (stem if number == 1 else stem.with_name(f"{stem.name}-{number}") for number in range(1, 10_000))
    return next(name for name in names if not name.exists())
