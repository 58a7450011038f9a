"""Search for the gate voltage of a wanted quiescent drain current: a bracketed secant, small steps upwards."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from benchrun.errors import InputError, InstrumentError

from .bias_steps import DeviceBias

#: Largest step towards more current (any is allowed towards less), and the first one, while the slope is not known.
LARGEST_RISE_V, FIRST_STEP_V = 0.05, 0.02
#: Steps smaller than this are lost in a supply's resolution.
SMALLEST_STEP_V = 0.001
MOST_STEPS = 60


@dataclass(frozen=True, slots=True)
class Window:
    """Wanted current and how near to it (A), and the range of gate voltages that the search may use (V)."""

    wanted_a: float
    within_a: float
    low_v: float
    high_v: float

    @classmethod
    def of(cls, parameters: Mapping[str, Any]) -> Window:
        """Return the window that a bring-up's parameters hold."""
        names = ("quiescent_a", "within_a", "gate_low_v", "gate_high_v")
        return cls(*(float(parameters[name]) for name in names))

    def check(self, start_v: float) -> None:
        """Raise InputError where the search makes no sense from `start_v`."""
        if not self.low_v < self.high_v:
            raise InputError("gate-range: the more negative voltage comes first, as in [-3.4 V, -2.2 V].")
        if not self.low_v <= start_v <= self.high_v:
            raise InputError(f"gate: {start_v:g} V lies outside of gate-range, {self.low_v:g} V to {self.high_v:g} V.")
        if not 0.0 < self.within_a < self.wanted_a:
            raise InputError("within: how near to the quiescent current is near enough: above 0, below that current.")

    def met_by(self, current_a: float) -> bool:
        """Whether a drain current is near enough."""
        return abs(current_a - self.wanted_a) <= self.within_a


class BiasSearch:
    """Moves the gate until the drain current is inside the window. The current rises with the gate's voltage."""

    def __init__(self, bias: DeviceBias, window: Window) -> None:
        self._bias, self._window = bias, window

    def run(self) -> float:
        """Return the current found (A). Raises InstrumentError with what was found where the window cannot be met."""
        low_v, high_v = self._window.low_v, self._window.high_v
        before: tuple[float, float] | None = None
        for _ in range(MOST_STEPS):
            gate_v, current_a = self._bias.gate_v, self._bias.current_a()
            if self._window.met_by(current_a):
                return current_a
            rising = current_a < self._window.wanted_a
            if gate_v >= self._window.high_v if rising else gate_v <= self._window.low_v:
                raise self._failed(current_a, "the gate may go no farther")
            low_v, high_v = (max(low_v, gate_v), high_v) if rising else (low_v, min(high_v, gate_v))
            if high_v - low_v < SMALLEST_STEP_V:
                break
            self._bias.move_gate(self._next_v(gate_v + self._step_v(gate_v, current_a, before), low_v, high_v))
            before = gate_v, current_a
        raise self._failed(self._bias.current_a(), "the current does not settle there")

    def _step_v(self, gate_v: float, current_a: float, before: tuple[float, float] | None) -> float:
        """Return the step by the slope of the last two points; a small one where they give none."""
        missing_a = self._window.wanted_a - current_a
        sign = 1.0 if missing_a > 0.0 else -1.0
        rose = before is not None and (current_a - before[1]) * (gate_v - before[0]) > 0.0
        size_v = abs(missing_a * (gate_v - before[0]) / (current_a - before[1])) if rose and before else FIRST_STEP_V
        return sign * max(size_v, SMALLEST_STEP_V)

    def _next_v(self, aimed_v: float, low_v: float, high_v: float) -> float:
        """Return the next gate voltage: as aimed, the bracket's middle, or the range's end; never far up at once."""
        if not low_v < aimed_v < high_v:
            at_end = (aimed_v >= high_v == self._window.high_v) or (aimed_v <= low_v == self._window.low_v)
            aimed_v = min(max(aimed_v, low_v), high_v) if at_end else (low_v + high_v) / 2.0
        return min(aimed_v, self._bias.gate_v + LARGEST_RISE_V)

    def _failed(self, current_a: float, why: str) -> InstrumentError:
        window = self._window
        return InstrumentError(
            f"bring-up: a quiescent current of {window.wanted_a * 1e3:.0f} mA within {window.within_a * 1e3:.0f} mA "
            f"was not found: {current_a * 1e3:.0f} mA at {self._bias.gate_v:.3f} V, gate range {window.low_v:g} V to "
            f"{window.high_v:g} V; {why}. Check the device, or give it another gate-range."
        )
