"""What must be as it was when a run began, so that readings can be added: software, files, bench, calibrations."""

from __future__ import annotations

import json
from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import Any

from benchrun.archive import ArchiveReader, Meta, software_versions
from benchrun.drivers.registry import load_registry
from benchrun.errors import BenchrunError, CalibrationError, InputError
from benchrun.flow.fits import require_fit
from benchrun.flow.inputs import Inputs
from benchrun.flow.known import of_run
from benchrun.flow.measure import plugin_versions
from benchrun.flow.planning import Known, plan
from benchrun.flow.produce import used
from benchrun.schedule import Schedule
from benchrun.schedule.build import without_ways

ADVICE = "Readings are never mixed: put back what was there, or begin a new run. Nothing was switched on."
_DECIDE = "benchrun", "plugin "


def require_software(meta: Meta, folder: Path) -> None:
    """Raise InputError where benchrun, or a plugin with its drivers and steps, is another than the run began with."""
    now = software_versions(plugin_versions(load_registry()))
    decide = {name: version for name, version in meta.versions.items() if name.startswith(_DECIDE)}
    _refuse(folder, [
        f"{name} was {before}, and is {now.get(name, 'not installed')}"
        for name, before in decide.items()
        if now.get(name) != before
    ])  # fmt: skip


def require_unchanged(meta: Meta, inputs: Inputs, folder: Path) -> None:
    """Raise InputError where the bench, or a file beside the archive, is another than the run began with."""
    _refuse(folder, [*_edited(meta, folder), *_other_files(meta, inputs)])


def _edited(meta: Meta, folder: Path) -> Iterator[str]:
    """Yield the copies of the run's files, beside the archive, that somebody has changed: he expects it to matter."""
    for name, text in meta.files.items():
        copy = folder / Path(name).name
        try:
            if copy.is_file() and copy.read_bytes() != text.encode():
                yield f"{copy} was changed since"
        except OSError as error:
            yield f"{copy} cannot be read ({error.strerror or error})"


def _other_files(meta: Meta, inputs: Inputs) -> Iterator[str]:
    """Yield what differs in the files that a bench file names, where another one stands in for the archive's."""
    there = inputs.files()
    for name, text in meta.files.items():
        if name not in (meta.bench, inputs.bench.path.name) and there.get(name, text) != text:
            yield f"{name} is another than the run began with"


def require_same_bench(before: Inputs, now: Inputs, folder: Path) -> None:
    """Raise InputError where a bench differs in more than the ways to its instruments; says in what."""
    one, other = (without_ways(json.loads(inputs.bench.canonical())) for inputs in (before, now))
    _refuse(folder, [f"{now.bench.path}: {place} is not what it was" for place in _differing(one, other)])


def _differing(one: Any, other: Any, place: str = "") -> Iterator[str]:
    """Yield the places at which two documents differ."""
    if isinstance(one, dict) and isinstance(other, dict):
        for key in sorted(one.keys() | other.keys()):
            yield from _differing(one.get(key), other.get(key), f"{place}.{key}" if place else key)
    elif one != other:
        yield place


def begun_with(archive: ArchiveReader) -> Known:
    """Return the calibrations and levellings that a run began with, as it keeps them, by name."""
    return used(archive, "")


def require_calibrations(archive: ArchiveReader, names: Mapping[str, str], known: Known, folder: Path) -> None:
    """Raise CalibrationError where the archive lacks one, or where the run that made one makes another now."""
    absent = [f"calibration '{name}' is not in its archive: it broke off before" for name in names if name not in known]
    changed = [text for event in archive.log("calibration") if (text := _changed(str(event.detail.get("run")), known))]
    if absent or changed:
        raise CalibrationError(_text(folder, [*absent, *changed]))


def _changed(run: str, known: Known) -> str:
    """Return what is to be said of a run that made one of these calibrations; "" where it is as it was, or gone."""
    for name, one in known.items():
        try:
            now = of_run(name, Path(run)).known
        except BenchrunError:
            continue
        if now.to_document() != one.to_document():
            return f"calibration '{name}' of {run} is another than the run began with"
    return ""


def planned_again(meta: Meta, inputs: Inputs, known: Known, folder: Path) -> Schedule:
    """Return the schedule, which must be the one that the run began with, once every level in it has passed.

    Raises InputError where it is another; CalibrationError, LevelError as before a run.
    """
    from benchrun.plan.levels import check_levels

    schedule = plan(inputs, known)
    if schedule.hash != meta.schedule_hash or len(schedule) != meta.readings_planned:
        _refuse(folder, [
            f"the schedule is another one ({schedule.hash[:12]}, {len(schedule)} readings) than it began with "
            f"({meta.schedule_hash[:12]}, {meta.readings_planned} readings): a step, or benchrun itself, was changed"
        ])  # fmt: skip
    require_fit(inputs, schedule, known, meta.origin)
    check_levels(schedule, inputs.bench).require()
    return schedule


def _refuse(folder: Path, reasons: list[str]) -> None:
    if reasons:
        raise InputError(_text(folder, reasons))


def _text(folder: Path, reasons: list[str]) -> str:
    return f"{folder}: cannot be taken up: {'; '.join(reasons)}. {ADVICE}"
