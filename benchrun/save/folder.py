"""Where results go: the run folder's top for the first, result-002/ and so on for later ones, none ever overwritten."""

from __future__ import annotations

from collections.abc import Collection
from pathlib import Path

from benchrun.derive.results import Results
from benchrun.errors import FolderError
from benchrun.save.files import write_whole
from benchrun.save.summary import write_summary
from benchrun.save.touchstone import FOLDER as TOUCHSTONE
from benchrun.save.touchstone import file_name, write_touchstone

KINDS = ("touchstone", "summary")


def save_results(results: Results, folder: Path, kinds: Collection[str] = KINDS) -> Path:
    """Save `results` into the run `folder` and return the folder that they are in.

    The first result of a run stands at the top of its folder, later ones in result-002, result-003, ...; what stands
    there is never overwritten. `kinds` says what is wanted: "touchstone" and "summary". Raises DiskError where the
    disk is full or fails, FolderError where the folder may not be written, DataSetError where two files would have
    one name.
    """
    target = _next_place(folder)
    if "touchstone" in kinds:
        _require_distinct(results)
        for data in results.networks:
            write_touchstone(target, data)
    if "summary" in kinds and results.tables:
        write_summary(target, results.tables)
    if results.notes:
        write_whole(target / "notes.txt", "".join(f"{note}\n" for note in results.notes))
    return target


def _next_place(folder: Path) -> Path:
    """Return the run folder itself where no result stands in it, else a new numbered folder in it."""
    if not any((folder / name).exists() for name in ("summary.csv", TOUCHSTONE, "notes.txt")):
        return folder
    for number in range(2, 1000):
        place = folder / f"result-{number:03d}"
        try:
            place.mkdir()
        except FileExistsError:
            continue
        except OSError as error:
            raise FolderError(
                f"{place}: cannot be made ({error.strerror}). Choose a folder that you may write to."
            ) from error
        return place
    raise FolderError(f"{folder}: holds 999 results already. Move some away.")


def _require_distinct(results: Results) -> None:
    names = [file_name(data).lower() for data in results.networks]
    twice = sorted({name for name in names if names.count(name) > 1})
    if twice:
        raise FolderError(f"two results would be called {twice[0]}: give the swept conditions values that differ.")
