"""Rehearse: the whole way of a recipe on simulated instruments, in virtual time."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from importlib.metadata import entry_points
from pathlib import Path
from typing import cast

from benchrun.acquire.progress import Progress
from benchrun.acquire.prompts import RehearsalPrompter
from benchrun.archive import open_archive
from benchrun.contract.clock import Clock
from benchrun.contract.rehearsal import ENTRY_POINT_GROUP, Rehearsal, RehearsalPlugin
from benchrun.errors import CalibrationError, FileProblemsError, InputError, LinkError, PluginError, Problem
from benchrun.flow.channel import ServedElsewhere
from benchrun.flow.inputs import Inputs, absent_recipes, load_inputs
from benchrun.flow.known import Made, newest
from benchrun.flow.measure import Setting, find_calibrations, given_calibrations, measure, prepare
from benchrun.flow.planning import plan
from benchrun.flow.result import RunResult

#: A recipe that uses calibrations begins this long after the last of them ended, in bench time.
PAUSE_NS = 600_000_000_000
DEFAULT_SEED = 1
NOTE = "Simulated instruments, virtual time. Nothing real is touched."


def rehearsal_plugin() -> RehearsalPlugin:
    """Return the installed simulated bench. Raises PluginError where there is none, or where it cannot be loaded."""
    found = list(entry_points(group=ENTRY_POINT_GROUP))
    if not found:
        raise PluginError(
            f"no simulated bench is installed: nothing offers the entry point group {ENTRY_POINT_GROUP}. "
            "Install benchrun again."
        )
    try:
        return cast("RehearsalPlugin", found[0].load())
    except Exception as error:
        raise PluginError(
            f"the simulated bench '{found[0].name}' ({found[0].value}) cannot be loaded: {error}."
        ) from error


def origin_of(seed: int) -> str:
    """Return the origin of what a rehearsal with this seed makes."""
    return f"simulated, seed {seed}"


def rehearse(
    recipe: Path,
    to: Path,
    *,
    bench: Path | None = None,
    seed: int | None = None,
    real_time: bool = False,
    calibrations: Mapping[str, Path] | None = None,
    listener: Progress,
    wanted_by: tuple[Path, ...] = (),
) -> RunResult:
    """Rehearse a recipe, and first what makes the calibrations that it uses where they are absent.

    Without a seed it is that of a served bench, else 1; `wanted_by` are the recipes whose calibration this one makes.
    Raises BenchrunError.
    """
    _require_no_circle(recipe, wanted_by)
    inputs = load_inputs(recipe, bench)
    if problems := absent_recipes(inputs, calibrations or {}):
        raise FileProblemsError(problems)
    plan(inputs, {})  # mistakes that show when values meet the bench come before any calibration is rehearsed for them
    seed = _seed(inputs, seed)
    given_calibrations(inputs, origin_of(seed), calibrations or {})
    _make_absent(inputs, to, bench, seed, real_time, calibrations or {}, listener, wanted_by)
    made = find_calibrations(inputs, to, origin_of(seed), calibrations or {})
    schedule = prepare(inputs, made, origin_of(seed))
    with rehearsal_of(inputs, seed, real_time) as world:
        start_ns = _start_ns(made)
        world.clock.align(start_ns)
        setting = Setting(
            runs=to,
            clock=Shifted(world.clock, start_ns),
            visa=world.visa_library if world.visa_library is not None else inputs.bench.visa.backend,
            addresses=world.addresses,
            origin=origin_of(seed),
            seed=seed,
            listener=listener,
            prompter=RehearsalPrompter(world.connect),
            note=NOTE,
            start_ns=start_ns,
        )
        return measure(inputs, schedule, made, setting)


def _seed(inputs: Inputs, asked: int | None) -> int:
    """Return the seed to rehearse with. Raises InputError where a served bench has another one than was asked for."""
    channel = inputs.bench.rehearsal_channel
    if channel is None:
        return DEFAULT_SEED if asked is None else asked
    with rehearsal_of(inputs, asked, real_time=False) as world:
        served = world.seed
    if asked not in (None, served):
        raise InputError(
            f"--seed {asked}: the bench that {inputs.bench.path} points at is simulated with seed {served}. "
            f"Leave --seed out, or serve it again: `benchrun simulate --seed {asked}`."
        )
    return served


def _require_no_circle(recipe: Path, wanted_by: tuple[Path, ...]) -> None:
    """Raise FileProblemsError where a recipe wants a calibration that, in the end, it would have to make itself."""
    if recipe.resolve() in {path.resolve() for path in wanted_by}:
        way = " wants ".join(path.name for path in (*wanted_by, recipe))
        message = f"this recipe wants a calibration that only it would make: {way}. Name the recipe that calibrates."
        raise FileProblemsError([Problem(str(recipe), 0, 0, message)])


def _make_absent(
    inputs: Inputs,
    to: Path,
    bench: Path | None,
    seed: int,
    real_time: bool,
    chosen: Mapping[str, Path],
    listener: Progress,
    wanted_by: tuple[Path, ...],
) -> None:
    """Rehearse the recipe of each calibration that no run in the folder holds."""
    for name, file in inputs.recipe.calibrations.items():
        if name in chosen:
            continue
        try:
            newest(name, to, inputs.bench, origin_of(seed), file)
        except CalibrationError:
            path = inputs.folder / file
            listener.message(f"Calibration '{name}' is absent: {path} is rehearsed first.")
            chain = (*wanted_by, inputs.path)
            result = rehearse(path, to, bench=bench, seed=seed, real_time=real_time, listener=listener, wanted_by=chain)
            for line in (*result.notes, str(result.folder)):
                listener.message(line)


@contextmanager
def rehearsal_of(inputs: Inputs, seed: int | None, real_time: bool) -> Iterator[Rehearsal]:
    """Open the simulated bench: in this process, or the served one that the bench file points at."""
    channel = inputs.bench.rehearsal_channel
    try:
        world = _open(rehearsal_plugin(), inputs, channel, seed, real_time)
    except OSError as error:
        raise LinkError(
            f"rehearsal channel {channel}: nothing serves a simulated bench there ({error}). "
            "Start `benchrun simulate` again."
        ) from error
    except ValueError as error:
        raise FileProblemsError(
            [inputs.bench_problem(f"the simulated bench cannot be built of this bench file: {error}.")]
        ) from error
    try:
        yield world
    finally:
        world.close()


def _open(plugin: RehearsalPlugin, inputs: Inputs, channel: str | None, seed: int | None, real_time: bool) -> Rehearsal:
    if channel is not None:
        return ServedElsewhere(plugin.open_channel(channel, real_time=real_time), channel)
    wiring = inputs.bench.wiring(inputs.kit)
    return plugin.open_in_process(wiring, seed=DEFAULT_SEED if seed is None else seed, real_time=real_time)


def _start_ns(made: list[Made]) -> int:
    """Return when bench time begins: some minutes after the last calibration ended, so that drift since is real."""
    ends = [_end_ns(one) for one in made]
    return max(ends) + PAUSE_NS if ends else 0


def _end_ns(made: Made) -> int:
    with open_archive(made.folder) as archive:
        begins = [int(event.detail.get("start_ns", 0)) for event in archive.log("bench-time")]
        return sum(begins[:1]) + max((reading.ended_ns for reading in archive.readings()), default=0)


class Shifted:
    """A clock that counts from `start_ns` of another one (contract.clock.Clock): a run's own time begins at 0."""

    def __init__(self, clock: Clock, start_ns: int) -> None:
        self._clock, self._start_ns = clock, start_ns

    @property
    def virtual(self) -> bool:
        """Whether this time is simulated."""
        return self._clock.virtual

    def now_ns(self) -> int:
        """Return the time since the start, in ns."""
        return self._clock.now_ns() - self._start_ns

    def sleep(self, duration_s: float) -> None:
        """Let time pass."""
        self._clock.sleep(duration_s)

    def align(self, start_ns: int) -> None:
        """Jump to `start_ns` of the run's own time, where that lies ahead."""
        self._clock.align(self._start_ns + start_ns)
