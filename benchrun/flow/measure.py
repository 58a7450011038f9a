"""The way of a measurement: levels checked, calibrations found, bench opened, readings committed, results saved."""

from __future__ import annotations

import uuid
from collections.abc import Mapping
from contextlib import suppress
from dataclasses import asdict, dataclass
from pathlib import Path
from typing import TYPE_CHECKING, Any

from benchrun.acquire.outcome import Outcome, outcome_of
from benchrun.acquire.progress import Progress
from benchrun.acquire.prompts import Prompter, require_somebody
from benchrun.archive import ArchiveWriter, Event, Meta, operator_name, software_versions
from benchrun.archive.meta import State
from benchrun.contract.clock import Clock
from benchrun.drivers.registry import Registry
from benchrun.errors import DiskError, IdentityError, StoppedError, UnsafeError
from benchrun.flow.fits import require_fit
from benchrun.flow.folders import make_run_folder
from benchrun.flow.inputs import Inputs
from benchrun.flow.kit_prompts import with_label
from benchrun.flow.known import Made, given, known_of, newest, require_names
from benchrun.flow.planning import Known, plan
from benchrun.flow.produce import keep_used, produce
from benchrun.flow.result import RunResult
from benchrun.flow.summary import rows_of
from benchrun.schedule import Schedule

if TYPE_CHECKING:
    from benchrun.drivers.open_bench import OpenBench


#: What an instrument says of itself for as long as it is the same instrument.
IDENTITY = ("maker", "model", "serial", "firmware", "options")


@dataclass(frozen=True, slots=True)
class Setting:
    """Where a measurement happens: folder of runs, clock, way to the instruments, and who is told and asked.

    `visa` is a backend word or a VISA library; `addresses` stand in for those of the bench file; `start_ns` is where
    in the simulated bench's time a rehearsal begins. For a run that is taken up again `start` is its first reading, and
    `who` are the instruments that must answer, as the archive keeps them.
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
    start: int = 0
    who: Mapping[str, Mapping[str, Any]] | None = None


def given_calibrations(inputs: Inputs, origin: str, chosen: Mapping[str, Path]) -> dict[str, Made]:
    """Return the calibrations of the runs that the user chose. Raises CalibrationError, FolderError."""
    require_names(chosen, inputs.recipe.calibrations)
    return {name: given(name, run, inputs.bench, origin) for name, run in chosen.items()}


def find_calibrations(inputs: Inputs, runs: Path, origin: str, chosen: Mapping[str, Path]) -> list[Made]:
    """Return what the recipe's calibrations stand for. Raises CalibrationError for one that is missing."""
    found = given_calibrations(inputs, origin, chosen)
    return [
        found.get(name) or newest(name, runs, inputs.bench, origin, str(inputs.folder / file))
        for name, file in inputs.recipe.calibrations.items()
    ]


def prepare(inputs: Inputs, made: list[Made], origin: str) -> Schedule:
    """Return the schedule once every level in it has passed and the calibrations cover it. Nothing is touched before.

    Raises FileProblemsError, CalibrationError, LevelError.
    """
    from benchrun.plan.levels import check_levels

    known = known_of(made)
    schedule = plan(inputs, known)
    require_fit(inputs, schedule, known, origin)
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
    except BaseException as error:  # also a defect of ours and Ctrl-C: what was committed is in this folder
        error.__dict__.setdefault("folder", folder)
        raise


def _measured(inputs: Inputs, schedule: Schedule, made: list[Made], setting: Setting, folder: Path) -> RunResult:
    _copy_files(inputs, folder)
    setting.listener.begin(inputs.recipe.title, len(schedule), setting.note)
    writer = _begun(inputs, schedule, made, setting, folder)
    return carry_out(writer, inputs, schedule, known_of(made), setting, folder)


def carry_out(
    writer: ArchiveWriter, inputs: Inputs, schedule: Schedule, known: Known, setting: Setting, folder: Path
) -> RunResult:
    """Acquire into an archive that is there, close it, derive and save. Raises BenchrunError."""
    state: State = "failed"
    try:
        state = _acquired(writer, inputs, schedule, setting).state
    except BaseException as error:
        with suppress(DiskError):  # the first error is the one to be told
            _broken_off(writer, error)
        raise
    finally:
        setting.listener.end()
    try:
        writer.close(state)
        produced = produce(inputs, folder, known)
    except DiskError as error:
        raise DiskError(f"{str(error).rstrip('.')}. Then `benchrun derive {folder}` makes the results.") from error
    except KeyboardInterrupt as error:
        text = f"Stopped while results were made. All readings are safe; `benchrun derive {folder}` makes the results."
        raise StoppedError(text) from error
    return RunResult(folder, state, 0, rows_of(produced.results), produced.results.notes)


def _begun(inputs: Inputs, schedule: Schedule, made: list[Made], setting: Setting, folder: Path) -> ArchiveWriter:
    """Return an archive that says where the run begins and what it uses. Raises DiskError, FolderError."""
    try:
        writer = ArchiveWriter.create(folder, meta_of(inputs, schedule, setting))
        try:
            begins = {"start_ns": setting.start_ns}
            writer.log(Event("bench-time", "where this run begins in the bench's time", begins))
            for one in made:
                text = f"uses {one.kind} '{one.name}' of {one.folder.name}"
                writer.log(Event("calibration", text, {"run": str(one.folder)}))
            keep_used(writer, known_of(made), "")
        except DiskError:
            with suppress(DiskError):
                writer.close("failed")
            raise
    except DiskError as error:
        raise DiskError(f"{str(error).rstrip('.')}. Nothing was switched on.") from error
    return writer


def _broken_off(writer: ArchiveWriter, error: BaseException) -> None:
    """Close the archive of a run that broke off. Raises DiskError."""
    outcome = outcome_of(error)
    if outcome is not None:
        writer.close(outcome.state)
        return
    try:
        writer.log(Event("failure", str(error) or type(error).__name__, {"error": type(error).__name__}))
    finally:
        writer.close("stopped" if isinstance(error, KeyboardInterrupt | StoppedError) else "failed")


def _copy_files(inputs: Inputs, folder: Path) -> None:
    """Keep the files as run beside the archive, for people; the archive has them too."""
    try:
        for name, text in inputs.files().items():
            (folder / Path(name).name).write_text(text, encoding="utf-8", newline="")
    except OSError as error:
        raise DiskError(
            f"{folder}: could not be written ({error.strerror or error}). Nothing was switched on. "
            "Make room, or choose another folder with --to."
        ) from error


def _acquired(writer: ArchiveWriter, inputs: Inputs, schedule: Schedule, setting: Setting) -> Outcome:
    """Open the bench and acquire. The bus is closed last, whatever happens."""
    from benchrun.acquire.runner import acquire
    from benchrun.drivers.open_bench import open_bench
    from benchrun.visa.session import Bus

    clock, steps = setting.clock, inputs.registry.steps
    prompter = with_label(setting.prompter, inputs.kit)
    with Bus(setting.visa) as bus:
        bench = open_bench(inputs.bench, inputs.registry, bus, clock, setting.addresses or None)
        try:
            _keep_identities(writer, bench, inputs, setting)
            return acquire(
                schedule, bench, inputs.bench, steps, writer, clock, prompter, setting.listener,
                start=setting.start,
            )  # fmt: skip
        finally:
            bench.close()


def _keep_identities(writer: ArchiveWriter, bench: OpenBench, inputs: Inputs, setting: Setting) -> None:
    """Write down who answers, or see that it is who answered before.

    Raises DiskError, IdentityError, UnsafeError: the bench is made safe then, as it is by acquire later.
    """
    from benchrun.acquire.outputs import outputs_of
    from benchrun.acquire.safe_state import make_safe

    try:
        if setting.who is None:
            writer.update(identities=identities_of(bench))
        else:
            require_same(identities_of(bench), setting.who)
    except (DiskError, IdentityError) as error:
        report = make_safe(bench, outputs_of(inputs.bench), setting.clock)
        made = f"Made safe: {report.text}" if report.safe else report.text
        text = f"{str(error).rstrip('.')}.\n{made}."
        raise (type(error)(text) if report.safe else UnsafeError(text)) from error


def require_same(answered: Mapping[str, Mapping[str, Any]], before: Mapping[str, Mapping[str, Any]]) -> None:
    """Raise IdentityError where others answer than the instruments that the readings before came from."""
    changed = [
        f"{name} answers with {field} '{now.get(field, '')}', and was '{before[name].get(field, '')}'"
        for name, now in answered.items()
        for field in IDENTITY
        if name in before and now.get(field, "") != before[name].get(field, "")
    ]
    if changed:
        raise IdentityError(
            f"other instruments than this run began with: {'; '.join(changed)}. Readings of two benches are not mixed: "
            "put back what was there, or begin a new run"
        )


def identities_of(bench: OpenBench) -> dict[str, dict[str, Any]]:
    """Return who answered, as the archive keeps it."""
    return {name: asdict(identity) for name, identity in bench.identities().items()}


def plugin_versions(registry: Registry) -> list[tuple[str, str]]:
    """Return each plugin, by its name and distribution, with its version."""
    return [(f"{plugin.name} ({plugin.distribution})", plugin.version) for plugin in registry.plugins]


def meta_of(inputs: Inputs, schedule: Schedule, setting: Setting) -> Meta:
    """Return what the archive says of a run before it begins."""
    device = inputs.recipe.device
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
        versions=software_versions(plugin_versions(inputs.registry)),
        operator=operator_name(),
    )
