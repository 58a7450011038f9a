"""From an archive to results and files: derive and save, from the archive alone."""

from __future__ import annotations

import tempfile
from collections.abc import Mapping
from dataclasses import dataclass
from importlib.metadata import version
from pathlib import Path
from typing import Any

from pydantic import BaseModel

from benchrun.archive import ArchiveReader, ArchiveWriter, Meta, open_archive
from benchrun.derive.calibration import Calibration
from benchrun.derive.levelling import Levelling
from benchrun.derive.pipeline import Step, derive
from benchrun.derive.results import Provenance, Results
from benchrun.errors import FolderError
from benchrun.flow.facts import definitions_of, facts_of
from benchrun.flow.folders import require_run
from benchrun.flow.inputs import Inputs, load_inputs
from benchrun.flow.known import of_run, require_names
from benchrun.flow.result import RunResult
from benchrun.flow.subject import Held, free_name, hold, subject_of, wanted, write_page
from benchrun.recipe.model import Entry
from benchrun.save import save_results
from benchrun.save.report import FILE_NAME, require_libraries

USED = {"calibration": "used-calibration", "levelling": "used-levelling"}


@dataclass(frozen=True, slots=True)
class Produced:
    """Results, and the folder that their files are in."""

    results: Results
    folder: Path


def produce(inputs: Inputs, run: Path, known: Mapping[str, Calibration | Levelling]) -> Produced:
    """Derive and save the results of a run with these calibrations; documents that it makes go into its archive.

    Raises CalibrationError, DataSetError, FolderError, DiskError.
    """
    if wanted(inputs):
        require_libraries()
    with open_archive(run) as archive:
        held = hold(archive)
    results = derived(inputs, held, known)
    folder = save_results(results, run, _kinds(inputs.recipe.save))
    with ArchiveWriter.append(run) as writer:
        for (kind, name), document in results.documents.items():
            writer.product(kind, name, document)
        keep_used(writer, known, folder.name)
    if wanted(inputs):
        with open_archive(run) as archive:
            subject = subject_of(archive, held, inputs.bench, known, results)
        write_page(subject, free_name(folder / FILE_NAME))
    return Produced(results, folder)


def derived(inputs: Inputs, held: Held, known: Mapping[str, Calibration | Levelling]) -> Results:
    """Return the results of an archive's readings; nothing is written. Raises CalibrationError, DataSetError."""
    return derive(
        [Step(entry.kind, values_of(entry.model)) for entry in inputs.recipe.derive],
        held.readings,
        facts_of(inputs.bench, inputs.kit),
        known,
        definitions_of(inputs.kit),
        provenance_of(held.meta, held.digest),
        inputs.kit.title if inputs.kit is not None else "",
    )


def keep_used(writer: ArchiveWriter, known: Mapping[str, Calibration | Levelling], result: str) -> None:
    """Keep in a run's archive what `result` was made with; "" before there is any, for a run that breaks off."""
    for name, one in known.items():
        kind = "calibration" if isinstance(one, Calibration) else "levelling"
        writer.product(USED[kind], name, {"result": result, "document": one.to_document()})


def values_of(model: BaseModel) -> dict[str, Any]:
    """Return an entry's values by field name; a duration carries its unit, valid_for_s."""
    return {"valid_for_s" if name == "valid_for" else name: value for name, value in model.model_dump().items()}


def _kinds(entries: tuple[Entry, ...]) -> list[str]:
    return [entry.kind for entry in entries]


def provenance_of(meta: Meta, digest: str) -> Provenance:
    """Return where results come from, as every file and document of theirs says it."""
    identities = {
        name: " ".join(str(who.get(field, "")) for field in ("maker", "model", "serial", "firmware")).strip()
        for name, who in meta.identities.items()
    }
    return Provenance(
        origin=meta.origin,
        version=version("benchrun"),
        title=meta.title,
        part=str(meta.device.get("part", "")),
        serial=str(meta.device.get("serial", "")),
        readings_hash=digest,
        schedule_hash=meta.schedule_hash,
        identities=identities,
    )


def derive_again(run: Path, calibrations: Mapping[str, Path]) -> RunResult:
    """Derive and save a run again, into a new numbered result, from its archive alone.

    `calibrations` names runs to take calibrations from; the others are those that the run was derived with before.
    """
    from benchrun.flow.summary import rows_of

    folder = require_run(run)
    with open_archive(folder) as archive:
        if archive.count == 0:
            raise FolderError(f"{folder}: there is no reading in this run, so there is nothing to derive.")
        meta, known = archive.meta, used(archive)
    with tempfile.TemporaryDirectory() as place:
        inputs = restored(meta, Path(place))
        require_names(calibrations, inputs.recipe.calibrations)
        known |= {name: of_run(name, require_run(other)).known for name, other in calibrations.items()}
        produced = produce(inputs, folder, known)
    return RunResult(produced.folder, meta.state, 0, rows_of(produced.results), produced.results.notes)


def used(archive: ArchiveReader, result: str | None = None) -> dict[str, Calibration | Levelling]:
    """Return the calibrations and levellings that a run's newest result was made with, by name.

    `result` names another one; "" stands for what the run began with, before there was any.
    """
    known: dict[str, Calibration | Levelling] = {}
    for kind, understood in (("calibration", Calibration.from_document), ("levelling", Levelling.from_document)):
        for product in archive.products(USED[kind]):
            if result in (None, product.document["result"]):
                known[product.name] = understood(product.document["document"])
    return known


def restored(meta: Meta, place: Path, bench: Path | None = None) -> Inputs:
    """Write the files of a run into `place` and read them again, so that nothing but the archive is needed.

    `bench` is a file to be read in place of the archive's own. Raises FolderError, FileProblemsError.
    """
    for name, text in meta.files.items():
        path = place / name
        if not path.resolve().is_relative_to(place.resolve()):
            raise FolderError(f"the archive names a file {name!r} outside of its folder; it is damaged or not ours.")
        path.parent.mkdir(parents=True, exist_ok=True)
        path.write_text(text, encoding="utf-8", newline="")
    kit = next((place / name for name in meta.files if name.endswith(".kit.yaml")), None)
    return load_inputs(place / meta.recipe, bench or place / meta.bench, kit)
