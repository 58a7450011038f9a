"""The device's temperature rise: first-order stages, heated by what the device dissipates.

The rise at a time depends on the changes of the settings and on the time alone, never on how often somebody looked:
between two changes the integration goes over a fixed grid of steps.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass

_STEP_NS = 5_000_000_000


@dataclass(frozen=True, slots=True)
class Stage:
    """One thermal resistance with its capacity."""

    time_constant_s: float
    rise_k_per_w: float


class Thermal:
    """Temperature rise of the device above its surroundings, K."""

    def __init__(self, stages: Sequence[Stage], dissipated_w: Callable[[float], float], *, memory: bool) -> None:
        self._stages = tuple(stages) if memory else ()
        self._dissipated_w = dissipated_w
        self._time_ns = 0
        self._rises = tuple(0.0 for _ in self._stages)

    def _step(self, rises: tuple[float, ...], duration_ns: int) -> tuple[float, ...]:
        power_w = self._dissipated_w(math.fsum(rises))
        return tuple(
            rise + (power_w * stage.rise_k_per_w - rise) * -math.expm1(-duration_ns * 1e-9 / stage.time_constant_s)
            for rise, stage in zip(rises, self._stages, strict=True)
        )

    def rise_k(self, now_ns: int) -> float:
        """Rise at a time not before the last change."""
        if not self._stages:
            return 0.0
        while now_ns - self._time_ns > _STEP_NS:
            self._rises = self._step(self._rises, _STEP_NS)
            self._time_ns += _STEP_NS
        return math.fsum(self._step(self._rises, now_ns - self._time_ns))

    def settle(self, now_ns: int) -> None:
        """Integrate up to now: to be called before a setting that changes the dissipation is changed."""
        self.rise_k(now_ns)
        if self._stages and now_ns > self._time_ns:
            self._rises = self._step(self._rises, now_ns - self._time_ns)
        self._time_ns = now_ns
