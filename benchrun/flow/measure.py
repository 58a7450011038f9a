"""The way of a measurement: levels checked, calibrations found, bench opened, readings committed, results saved."""

from __future__ import annotations

import uuid
from collections.abc import Mapping
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

from benchrun.acquire.progress import Progress
from benchrun.acquire.prompts import Prompter, require_somebody
from benchrun.archive import ArchiveWriter, Event, Meta, operator_name, software_versions
from benchrun.contract.clock import Clock
from benchrun.errors import BenchrunError
from benchrun.flow.folders import make_run_folder
from benchrun.flow.inputs import Inputs
from benchrun.flow.known import Made, known_of, pick
from benchrun.flow.planning import plan
from benchrun.flow.produce import produce
from benchrun.flow.result import RunResult
from benchrun.flow.summary import rows_of
from benchrun.schedule import Schedule

if TYPE_CHECKING:
    from benchrun.drivers.open_bench import OpenBench


@dataclass(frozen=True, slots=True)
class Setting:
    """Where a measurement happens: folder of runs, clock, way to the instruments, and who is told and asked.

    `visa` is a backend word or a VISA library; `addresses` stand in for those of the bench file; `start_ns` is where
    in the simulated bench's time a rehearsal begins.
    """

    runs: Path
    clock: Clock
    visa: Any
    addresses: Mapping[str, str]
    origin: str
    seed: int | None
    listener: Progress
    prompter: Prompter
    note: str = ""
    start_ns: int = 0


def find_calibrations(inputs: Inputs, runs: Path, origin: str, chosen: Mapping[str, Path]) -> list[Made]:
    """Return what the recipe's calibrations stand for. Raises CalibrationError for one that is missing."""
    for name in chosen:
        if name not in inputs.recipe.calibrations:
            known = ", ".join(inputs.recipe.calibrations) or "none"
            raise _unknown_choice(name, known)
    return [
        pick(name, runs, inputs.bench, origin, chosen.get(name), str(inputs.folder / file))
        for name, file in inputs.recipe.calibrations.items()
    ]


def _unknown_choice(name: str, known: str) -> BenchrunError:
    from benchrun.errors import CalibrationError

    return CalibrationError(f"--calibration {name}: the recipe uses no calibration of this name; it uses {known}.")


def prepare(inputs: Inputs, made: list[Made]) -> Schedule:
    """Return the schedule once every level in it has passed and the calibrations cover it. Nothing is touched before.

    Raises FileProblemsError, CalibrationError, LevelError.
    """
    from benchrun.plan.levels import check_levels

    known = known_of(made)
    schedule = plan(inputs, known)
    check_levels(schedule, inputs.bench).require()
    return schedule


def measure(inputs: Inputs, schedule: Schedule, made: list[Made], setting: Setting) -> RunResult:
    """Acquire, derive and save; every way out leaves RF off and committed readings in the archive.

    Raises BenchrunError; what was acquired before stays in the run folder, which the error names.
    """
    require_somebody(schedule.prompts, setting.prompter)
    device = inputs.recipe.device
    folder = make_run_folder(
        setting.runs, device.serial if device else None, inputs.path.name.removesuffix(".recipe.yaml")
    )
    try:
        return _measured(inputs, schedule, made, setting, folder)
    except BenchrunError as error:
        error.add_note(str(folder))
        error.__dict__.setdefault("folder", folder)
        raise


def _measured(inputs: Inputs, schedule: Schedule, made: list[Made], setting: Setting, folder: Path) -> RunResult:
    for name, text in inputs.files().items():
        (folder / Path(name).name).write_text(text, encoding="utf-8", newline="")
    setting.listener.begin(inputs.recipe.title, len(schedule), setting.note)
    with ArchiveWriter.create(folder, meta_of(inputs, schedule, setting)) as writer:
        writer.log(Event("bench-time", "where this run begins in the bench's time", {"start_ns": setting.start_ns}))
        for one in made:
            writer.log(
                Event("calibration", f"uses {one.kind} '{one.name}' of {one.folder.name}", {"run": str(one.folder)})
            )
        acquire_into(writer, inputs, schedule, setting)
    setting.listener.end()
    produced = produce(inputs, folder, known_of(made))
    return RunResult(folder, "complete", 0, rows_of(produced.results), produced.results.notes)


def acquire_into(writer: ArchiveWriter, inputs: Inputs, schedule: Schedule, setting: Setting) -> None:
    """Open the bench and acquire. The bus is closed last, whatever happens."""
    from benchrun.acquire.runner import acquire
    from benchrun.drivers.open_bench import open_bench
    from benchrun.visa.session import Bus

    with Bus(setting.visa) as bus:
        bench = open_bench(inputs.bench, inputs.registry, bus, setting.clock, setting.addresses or None)
        try:
            writer.update(identities=identities_of(bench))
            acquire(
                schedule,
                bench,
                inputs.bench,
                inputs.registry.steps,
                writer,
                setting.clock,
                setting.prompter,
                setting.listener,
            )
        finally:
            bench.close()


def identities_of(bench: OpenBench) -> dict[str, dict[str, Any]]:
    """Return who answered, as the archive keeps it."""
    return {name: asdict(identity) for name, identity in bench.identities().items()}


def meta_of(inputs: Inputs, schedule: Schedule, setting: Setting) -> Meta:
    """Return what the archive says of a run before it begins."""
    device = inputs.recipe.device
    plugins = [(f"{plugin.name} ({plugin.distribution})", plugin.version) for plugin in inputs.registry.plugins]
    return Meta(
        run_id=str(uuid.uuid4()),
        title=inputs.recipe.title,
        recipe=inputs.path.name,
        bench=inputs.bench.path.name,
        files=inputs.files(),
        schedule_hash=schedule.hash,
        readings_planned=len(schedule),
        origin=setting.origin,
        seed=setting.seed,
        device={"part": device.part, "serial": device.serial or ""} if device else {},
        versions=software_versions(plugins),
        operator=operator_name(),
    )
