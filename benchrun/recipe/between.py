"""What the parts of a recipe say of each other: readings nobody takes, calibrations nobody makes, a missing kit."""

from __future__ import annotations

from collections.abc import Collection, Iterator, Sequence

from benchrun.bench import Bench
from benchrun.bench.hashing import receivers_at
from benchrun.errors import Problem
from benchrun.recipe.entries import OF_READINGS, Calibrate, Correct, HotMatch, LevelChain, OnePort
from benchrun.recipe.messages import no_such
from benchrun.recipe.model import Entry, RecipeFile
from benchrun.yaml_source import Source


def problems_between(
    source: Source,
    file: RecipeFile,
    derive: Sequence[Entry],
    readings: Collection[str] | None,
    bench: Bench | None,
) -> list[Problem]:
    """Return every mistake between the parts of a recipe; `readings` are the names of all that are taken, if known."""
    return [
        *(() if readings is None else _readings(source, readings, derive)),
        *(_corrected(source, derive) if len(derive) == len(file.derive) else ()),
        *_calibrations(source, file, derive),
        *_made(source, file, derive, bench),
    ]


def _readings(source: Source, taken: Collection[str], derive: Sequence[Entry]) -> Iterator[Problem]:
    for entry in derive:
        for field in OF_READINGS:
            name = getattr(entry.model, field, None)
            if name is not None and name not in taken:
                yield source.problem((*entry.path, field), no_such("reading", name, taken))


def _corrected(source: Source, derive: Sequence[Entry]) -> Iterator[Problem]:
    """What needs corrected waves stands behind the entry that corrects them."""
    corrected: set[str] = set()
    for entry in derive:
        if isinstance(entry.model, Correct):
            corrected.add(entry.model.readings)
        elif isinstance(entry.model, OnePort | HotMatch) and entry.model.readings not in corrected:
            name = entry.model.readings
            message = (
                f"'{name}' is not corrected yet: put `- correct: {{readings: {name}, calibration: ...}}` before this."
            )
            yield source.problem((*entry.path, "readings"), message)


def _calibrations(source: Source, file: RecipeFile, derive: Sequence[Entry]) -> Iterator[Problem]:
    for entry in derive:
        field = "calibration" if isinstance(entry.model, Correct) else "drive"
        name = getattr(entry.model, field, None)
        if name is not None and name not in file.calibrations:
            advice = "Name the recipe that makes it under `calibrations`."
            message = f"{no_such('calibration', name, file.calibrations)} {advice}"
            yield source.problem((*entry.path, field), message)


def _made(source: Source, file: RecipeFile, derive: Sequence[Entry], bench: Bench | None) -> Iterator[Problem]:
    """Calibrations that this recipe makes have what they need."""
    for entry in derive:
        if isinstance(entry.model, Calibrate) and file.kit is None:
            message = "no kit is named that says what the standards are: write `kit: FILE.kit.yaml` at the top."
            yield source.problem(entry.path, message, at_key=True)
        if isinstance(entry.model, Calibrate) and bench and not _seen_both_ways(bench, entry.model.plane):
            message = (
                f"no coupler's two arms are read at the {entry.model.plane} plane; a calibration needs an incident and "
                "a reflected receiver there."
            )
            yield source.problem((*entry.path, "plane"), message)
        if isinstance(entry.model, LevelChain) and bench and entry.model.signal not in bench.signals:
            yield source.problem((*entry.path, "signal"), no_such("signal", entry.model.signal, bench.signals))


def _seen_both_ways(bench: Bench, plane: str) -> bool:
    """Whether receivers read both arms of a coupler on the way to a plane."""
    return {"incident", "reflected"} <= {receiver.arm for receiver in receivers_at(bench, plane).values()}
