"""Calibrations and levellings in a folder of runs: which there are, and which one fits a bench."""

from __future__ import annotations

from collections.abc import Collection, Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from benchrun.archive import open_archive
from benchrun.archive.meta import utc_now
from benchrun.bench import Bench
from benchrun.derive.calibration import Calibration
from benchrun.derive.levelling import Levelling
from benchrun.errors import BenchrunError, CalibrationError, FolderError
from benchrun.flow.folders import require_run, run_folders

KINDS = ("calibration", "levelling")


@dataclass(frozen=True, slots=True)
class Made:
    """A calibration or levelling, and the run that it came from."""

    folder: Path
    kind: str
    number: int
    document: Mapping[str, Any]
    known: Calibration | Levelling

    @property
    def name(self) -> str:
        """Name that recipes call it by."""
        return self.known.name


def made_in(folder: Path) -> list[Made]:
    """Return what a run made, oldest first. Raises FolderError, CalibrationError."""
    with open_archive(folder) as archive:
        return [
            Made(folder, product.kind, product.number, product.document, _understood(product.kind, product.document))
            for product in archive.products()
            if product.kind in KINDS
        ]


def _understood(kind: str, document: Mapping[str, Any]) -> Calibration | Levelling:
    return Calibration.from_document(document) if kind == "calibration" else Levelling.from_document(document)


def newest(name: str, runs: Path, bench: Bench, origin: str, recipe: str) -> Made:
    """Return the newest calibration `name` below `runs` that fits this bench's parts, this origin and today.

    Raises CalibrationError that says what there is instead and which recipe makes one.
    """
    candidates = [made for made in _all(runs) if made.name == name]
    fitting = [made for made in candidates if not misfit(made, bench, origin)]
    if fitting:
        return max(fitting, key=lambda made: (made.known.circumstances.made_utc, made.folder.name, made.number))
    reasons = "".join(f"\n    {made.folder}: {misfit(made, bench, origin)}" for made in candidates[-3:])
    raise CalibrationError(
        f"calibration '{name}' is missing: no run in {runs} holds one that fits this bench.{reasons}\n"
        f"    Make it with {recipe}, or name a run with --calibration {name}=RUN. Nothing was switched on."
    )


def given(name: str, run: Path, bench: Bench, origin: str) -> Made:
    """Return the calibration `name` of a run that the user chose. Raises FolderError, CalibrationError."""
    made = of_run(name, require_run(run))
    if reason := misfit(made, bench, origin):
        raise CalibrationError(f"{run}: {reason} Nothing was switched on.")
    return made


def require_names(chosen: Iterable[str], used: Collection[str]) -> None:
    """Raise CalibrationError where a calibration was chosen that the recipe does not use."""
    for name in chosen:
        if name not in used:
            there = ", ".join(used) or "none"
            raise CalibrationError(
                f"--calibration {name}: the recipe uses no calibration of this name; it uses {there}."
            )


def misfit(made: Made, bench: Bench, origin: str) -> str:
    """Return why something made does not fit a bench and an origin, "" where it does."""
    circumstances, plane = made.known.circumstances, made.known.plane
    try:
        circumstances.require(
            f"{made.kind} '{made.name}'", bench.part_hash(plane), utc_now(), origin, bench.part_summaries(plane)
        )
    except CalibrationError as error:
        return str(error)
    return ""


def of_run(name: str, folder: Path) -> Made:
    """Return the newest calibration `name` that a run made. Raises FolderError, CalibrationError."""
    found = [made for made in made_in(folder) if made.name == name]
    if not found:
        raise CalibrationError(
            f"{folder}: this run made no calibration '{name}'. `benchrun calibrations` lists what there is."
        )
    return found[-1]


def _all(runs: Path) -> Iterator[Made]:
    for folder in run_folders(runs):
        try:
            yield from made_in(folder)
        except (FolderError, CalibrationError):
            continue  # a damaged run must not stand in the way of a sound one


def calibrations(runs: Path) -> list[dict[str, Any]]:
    """Return what there is below a folder of runs, newest last; a run that cannot be read is listed with the reason."""
    records: list[dict[str, Any]] = []
    for folder in run_folders(runs):
        try:
            records += [_record(made) for made in made_in(folder)]
        except BenchrunError as error:
            records.append({"name": "", "kind": "unreadable", "run": str(folder), "note": str(error)})
    return records


def _record(made: Made) -> dict[str, Any]:
    circumstances, grid = made.known.circumstances, made.known.frequency_hz
    return {
        "name": made.name,
        "kind": made.kind,
        "plane": made.known.plane,
        "made_utc": circumstances.made_utc,
        "valid_until_utc": circumstances.valid_until_utc,
        "origin": circumstances.origin,
        "from_hz": float(grid[0]),
        "to_hz": float(grid[-1]),
        "parts": ", ".join(
            f"{name} {text}" for name, text in circumstances.parts.items() if not name.startswith("receiver ")
        ),
        "run": str(made.folder),
    }


def known_of(made: Sequence[Made]) -> dict[str, Calibration | Levelling]:
    """Return what was made by name."""
    return {one.name: one.known for one in made}
