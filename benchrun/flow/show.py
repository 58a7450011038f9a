"""What a run holds, and its results handed on in files."""

from __future__ import annotations

import shutil
from collections import Counter
from pathlib import Path
from typing import Any

from benchrun.archive import ArchiveReader, open_archive
from benchrun.errors import FolderError
from benchrun.flow.folders import require_run

FORMS = {"touchstone": "touchstone/*.s?p", "csv": "*.csv"}


def show(run: Path) -> dict[str, Any]:
    """Return what a run holds as plain data. Raises FolderError."""
    folder = require_run(run)
    with open_archive(folder) as archive:
        meta = archive.meta
        return {
            "title": meta.title,
            "device": " ".join(str(value) for value in meta.device.values()),
            "state": meta.state,
            "origin": meta.origin,
            "started_utc": meta.started_utc,
            "ended_utc": meta.ended_utc,
            "operator": meta.operator,
            "readings": archive.count,
            "readings_planned": meta.readings_planned,
            "schedule_hash": meta.schedule_hash,
            "digest": archive.digest(),
            "results": [place.name if place != folder else "first" for place in _results(folder)],
            "reading": _readings(archive),
            "instruments": [{"name": name, **who} for name, who in meta.identities.items()],
            "products": [
                {"number": p.number, "kind": p.kind, "name": p.name, "made_utc": p.made_utc} for p in archive.products()
            ],
            "log": [{"at_utc": event.at_utc, "kind": event.kind, "text": event.text} for event in archive.log()],
            "damage": [{"problem": problem} for problem in archive.check()],
        }


def _readings(archive: ArchiveReader) -> list[dict[str, Any]]:
    """Return a record for each name of readings: how many, of which shape, and their flags."""
    records = []
    for name in archive.names:
        count, flags, shape = 0, Counter[str](), ""
        for reading in archive.readings(name):
            count += 1
            flags.update(reading.flags)
            tones, waves = "/".join(reading.tones) or "no tones", "/".join(reading.waves) or "no waves"
            shape = f"{tones} x {waves} x {len(reading.frequencies_hz)} points"
        flagged = ", ".join(f"{number} {word}" for word, number in flags.most_common())
        records.append({"name": name, "count": count, "each": shape, "flags": flagged})
    return records


def _results(folder: Path) -> list[Path]:
    """Return the folders of a run that hold a result, oldest first."""
    places = [folder, *sorted(folder.glob("result-*"))]
    return [place for place in places if any(place.glob("*.csv")) or any(place.glob("touchstone/*"))]


def export(run: Path, form: str, to: Path) -> list[Path]:
    """Copy the newest result of a run in one form into a folder, and return the copies. Nothing there is overwritten.

    Raises FolderError where there is no result of this form, where a file of the name is there already, or where it
    cannot be written.
    """
    folder = require_run(run)
    results = [place for place in _results(folder) if any(place.glob(FORMS[form]))]
    if not results:
        raise FolderError(
            f"{folder}: no result of this run is saved as {form}. "
            f"`benchrun derive {folder}` makes one where its recipe asks for it."
        )
    try:
        to.mkdir(parents=True, exist_ok=True)
        sources = sorted(results[-1].glob(FORMS[form]))
        _require_absent([to / source.name for source in sources])
        return [Path(shutil.copyfile(source, to / source.name)) for source in sources]
    except OSError as error:
        raise FolderError(
            f"{to}: cannot be written ({error.strerror or error}). Choose another folder with --to."
        ) from error


def _require_absent(targets: list[Path]) -> None:
    for target in targets:
        if target.exists():
            raise FolderError(
                f"{target}: is there already, and nothing is overwritten. Choose another folder with --to."
            )
