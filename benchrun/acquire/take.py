"""Taking one reading: reference lock, waves, scalars, flags; anything that is not a number is refused."""

from __future__ import annotations

import math
import sys
from collections.abc import Collection, Mapping
from dataclasses import dataclass

import numpy as np

from benchrun.acquire.grid import Grid
from benchrun.acquire.opened import OpenBench
from benchrun.acquire.outputs import Outputs
from benchrun.acquire.witness import Witness
from benchrun.archive.meta import utc_now
from benchrun.contract.actions import ReadAction
from benchrun.contract.capture import Capture, ComplexArray, WaveData
from benchrun.contract.clock import Clock
from benchrun.contract.reading import Reading
from benchrun.errors import ReplyError

#: Words that a reading is flagged with, each followed by a colon and what it is about.
OVER_LIMIT, UNLOCKED, TRIPPED = "over-limit", "reference-unlocked", "tripped"
_FINITE = (-sys.float_info.max, sys.float_info.max)
_NO_WAVES = np.empty((0, 0, 0), dtype=np.complex128)
_ADVICE = "The reading was not kept. Look at the receiver's own screen, and at its cable"


@dataclass(slots=True)
class Taker:
    """Takes readings from an open bench whose RF and receiver are as the reading wants them."""

    bench: OpenBench
    outputs: Outputs
    clock: Clock
    witness: Witness
    grid: Grid

    def take(
        self,
        index: int,
        action: ReadAction,
        conditions: Mapping[str, float | str],
        start_ns: int,
        drains: Collection[str] = (),
    ) -> Reading:
        """Return reading `index`, started at the timetable's `start_ns` where time is virtual. Raises BenchError.

        `drains` are up, and looked at afterwards: a protection that tripped is flagged.
        """
        capture = action.capture
        flags = [f"{UNLOCKED}:{name}" for name in action.signals if not self.grid.sources[name].locked()]
        self.clock.align(start_ns)
        started_ns, started_utc = self.clock.now_ns(), utc_now()
        data, coherent = self._waves(capture, flags)
        scalars = self._scalars(action, flags)
        if drains:
            flags += [f"{TRIPPED}:{drain}" for drain in drains if self.bench.supply(drain).tripped(drain)]
        return Reading(
            index=index,
            name=action.name,
            attempt=0,
            conditions=conditions,
            frequencies_hz=capture.frequencies_hz if capture else (),
            tones=capture.tones if capture else (),
            offsets_hz=capture.offsets_hz if capture else (),
            waves=capture.waves if capture else (),
            data=data,
            coherent=coherent,
            scalars=scalars,
            flags=tuple(flags),
            started_ns=started_ns,
            ended_ns=self.clock.now_ns(),
            started_utc=started_utc,
        )

    def _waves(self, capture: Capture | None, flags: list[str]) -> tuple[ComplexArray, bool]:
        if capture is None or not capture.waves:
            return _NO_WAVES if capture is None else np.empty(capture.shape, dtype=np.complex128), False
        found = self.grid.receiver.acquire()
        _require_numbers(capture, found)
        if True in found.over_limit:
            flags += [
                f"{OVER_LIMIT}:{name}" for name, over in zip(capture.waves, found.over_limit, strict=True) if over
            ]
        self.witness.remember(capture, found.data)
        return found.data, found.coherent

    def _scalars(self, action: ReadAction, flags: list[str]) -> dict[str, float]:
        keys, limits, read = self.outputs.scalar_keys, self.outputs.scalar_limits, self.bench.read
        scalars = {}
        for name in action.scalars:
            scalars[keys[name]] = value = read(name)
            low, high = limits.get(name, _FINITE)
            if not low <= value <= high:
                flags.append(self._outside(name, value))
        return scalars

    @staticmethod
    def _outside(name: str, value: float) -> str:
        """Return the flag for a scalar outside its limits. Raises ReplyError where it is no number at all."""
        if math.isnan(value):
            raise ReplyError(f"{name}: the instrument answered that it is not a number. {_ADVICE}")
        return f"{OVER_LIMIT}:{name}"


def _require_numbers(capture: Capture, found: WaveData) -> None:
    """Raise ReplyError for waves of another shape, or with a value that is not a finite number."""
    if found.data.shape != capture.shape or len(found.over_limit) != len(capture.waves):
        raise ReplyError(
            f"the receiver gave waves of shape {found.data.shape} and {len(found.over_limit)} limit flags; "
            f"{capture.shape} (tones, waves, points) was asked for. {_ADVICE}"
        )
    finite = np.isfinite(found.data)
    if np.logical_and.reduce(finite, axis=None):  # all() is Python code in NumPy, and costs three times as much
        return
    tone, wave, point = np.argwhere(~finite)[0]
    raise ReplyError(
        f"receiver {capture.waves[wave]}: what it gave for the {capture.tones[tone]} at "
        f"{capture.frequencies_hz[point] / 1e9:.6g} GHz is not a number. {_ADVICE}"
    )
