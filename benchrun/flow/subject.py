"""What a report of a run is made of, taken from its archive; and the page written from it."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

from benchrun.archive import ArchiveReader, Meta
from benchrun.archive.meta import utc_now
from benchrun.bench import Bench
from benchrun.contract.reading import Reading
from benchrun.derive.calibration import Calibration
from benchrun.derive.levelling import Levelling
from benchrun.derive.results import Results
from benchrun.errors import FileProblemsError, Problem
from benchrun.flow.inputs import Inputs
from benchrun.save.files import write_whole
from benchrun.save.report import Subject, absent_libraries, report_html, require_libraries
from benchrun.save.report.libraries import ADVICE

KIND = "report"
Known = Mapping[str, Calibration | Levelling]


@dataclass(frozen=True, slots=True)
class Held:
    """An archive's final readings by name, read once, with what says where they come from."""

    meta: Meta
    readings: Mapping[str, Sequence[Reading]]
    digest: str


def hold(archive: ArchiveReader) -> Held:
    """Read an archive's readings. Raises FolderError."""
    return Held(archive.meta, {name: list(archive.readings(name)) for name in archive.names}, archive.digest())


def wanted(inputs: Inputs) -> bool:
    """Whether a recipe asks for a report."""
    return any(entry.kind == KIND for entry in inputs.recipe.save)


def require_report(inputs: Inputs) -> None:
    """Raise FileProblemsError, at its place, where a recipe asks for a report and what makes one is not installed."""
    absent = " and ".join(absent_libraries())
    places = [entry.at for entry in inputs.recipe.save if entry.kind == KIND]
    if absent and places:
        message = f"a report needs {absent}, not installed here. {ADVICE}; or leave this entry out."
        raise FileProblemsError([Problem(place.file, place.line, place.column, message) for place in places])


def subject_of(
    archive: ArchiveReader, held: Held, bench: Bench | None, known: Known, results: Results, refusal: str = ""
) -> Subject:
    """Return everything that a report tells of an archive; `refusal` says why there are no results."""
    made = {one.name: one for document in results.documents.values() if (one := _understood(document)) is not None}
    return Subject(
        meta=held.meta,
        readings=held.readings,
        digest=held.digest,
        events=archive.log(),
        repeated=archive.count_all - archive.count,
        bench=bench,
        known=known,
        made=made,
        results=results,
        refusal=refusal,
        problems=archive.check(),
    )


def write_page(subject: Subject, path: Path) -> None:
    """Write the report of `subject` to `path`. Raises InputError, FolderError, DiskError."""
    require_libraries()
    write_whole(path, report_html(subject, utc_now()))


def free_name(path: Path) -> Path:
    """Return `path`, or the first of report-2.html, report-3.html, ... that is not there yet."""
    names = (path.with_stem(f"{path.stem}-{number}") for number in range(2, 10_000))
    return path if not path.exists() else next(name for name in names if not name.exists())


def _understood(document: Mapping[str, object]) -> Calibration | Levelling | None:
    match document.get("kind"):
        case "calibration":
            return Calibration.from_document(document)
        case "levelling":
            return Levelling.from_document(document)
        case _:
            return None
