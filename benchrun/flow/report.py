"""The report of a run: one page, from its archive alone, whatever became of the run."""

from __future__ import annotations

import tempfile
from pathlib import Path

from benchrun.archive import ArchiveReader, open_archive
from benchrun.derive.calibration import Calibration
from benchrun.derive.levelling import Levelling
from benchrun.derive.results import Results
from benchrun.errors import BenchrunError, FolderError
from benchrun.flow.folders import require_run
from benchrun.flow.produce import derived, restored, used
from benchrun.flow.subject import Held, free_name, hold, subject_of, write_page
from benchrun.save.report import FILE_NAME, Subject, require_libraries


def report(run: Path, to: Path | None = None) -> Path:
    """Write the report of a run to the file `to`, else into its folder, and return the file's path.

    Results are derived again in memory, with the calibrations of the newest result. Nothing is overwritten. Raises
    InputError where a library is absent, FolderError, DiskError.
    """
    require_libraries()
    folder = require_run(run)
    path = free_name(folder / FILE_NAME) if to is None else _absent(to)
    with open_archive(folder) as archive, tempfile.TemporaryDirectory() as place:
        subject = _subject(archive, hold(archive), Path(place))
    write_page(subject, path)
    return path


def _subject(archive: ArchiveReader, held: Held, place: Path) -> Subject:
    """Return what the report tells; where no result can be derived, the reason stands in its place."""
    known: dict[str, Calibration | Levelling] = {}
    bench, results, refusal = None, Results(), ""
    try:
        known = used(archive)
        inputs = restored(archive.meta, place)
        bench = inputs.bench
        results = derived(inputs, held, known) if held.readings else results
    except BenchrunError as error:
        refusal = str(error).replace(f"{place}/", "")
    return subject_of(archive, held, bench, known, results, refusal)


def _absent(to: Path) -> Path:
    """Return the file to write. Raises FolderError where it is there already, or is a folder."""
    path = to / FILE_NAME if to.is_dir() else to
    if path.exists():
        raise FolderError(f"{path}: is there already, and nothing is overwritten. Choose another file with --to.")
    return path
