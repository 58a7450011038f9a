"""Run: a recipe on the real bench."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path

from benchrun.acquire.clock import RealClock
from benchrun.acquire.progress import Progress
from benchrun.acquire.prompts import Prompter
from benchrun.errors import InputError
from benchrun.flow.inputs import load_inputs
from benchrun.flow.measure import Setting, find_calibrations, measure, prepare
from benchrun.flow.result import RunResult

REAL = "real"


def run(
    recipe: Path,
    to: Path,
    *,
    bench: Path | None = None,
    calibrations: Mapping[str, Path] | None = None,
    listener: Progress,
    prompter: Prompter,
) -> RunResult:
    """Run a recipe on the bench that its bench file describes; RF and drain are off on every way out.

    Raises BenchrunError.
    """
    inputs = load_inputs(recipe, bench)
    if inputs.bench.simulated:
        raise InputError(
            f"{inputs.bench.path}: this bench is marked simulated. Use `benchrun rehearse` with --bench. "
            "Nothing was switched on."
        )
    made = find_calibrations(inputs, to, REAL, calibrations or {})
    schedule = prepare(inputs, made, REAL)
    setting = Setting(
        runs=to,
        clock=RealClock(),
        visa=inputs.bench.visa.backend,
        addresses={},
        origin=REAL,
        seed=None,
        listener=listener,
        prompter=prompter,
    )
    return measure(inputs, schedule, made, setting)
