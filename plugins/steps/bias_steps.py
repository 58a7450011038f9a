"""Bias of a depletion device, one small step at a time, the drain current looked at after each.

Order (common practice, no source): gate to pinch-off and seen there, drain up, gate up. Nothing here can put the drain
on otherwise.
"""

from __future__ import annotations

import math

from benchrun.contract.hooks import BenchAccess
from benchrun.errors import InputError, InstrumentError

GATE, DRAIN = "gate", "drain"
#: Largest step of each voltage on the way up, and the pause after it.
DRAIN_STEP_V, GATE_STEP_V = 4.0, 0.1
PAUSE_S = 0.005
#: The drain counts as released below this voltage where the bench file says nothing else.
RELEASED_V = 1.0
#: A voltage counts as reached within this much, or this part of it.
REACHED_V, REACHED_PART = 0.1, 0.02
LOOKS, LOOK_S = 50, 0.1


def steps(start: float, end: float, largest: float) -> list[float]:
    """Return the values after each even step from `start` to `end`, no step above `largest`; [] where equal."""
    count = math.ceil(abs(end - start) / largest - 1e-9)
    return [start + (end - start) * k / count for k in range(1, count)] + [end] * (count > 0)


class DeviceBias:
    """Gate and drain through BenchAccess. All voltages in V, currents in A; every method may raise BenchError."""

    def __init__(self, access: BenchAccess) -> None:
        self._access = access
        self._limits = {bias: access.bias_limits(bias) for bias in (GATE, DRAIN)}
        self._pinch_off_v = self._limits[GATE].get("pinch_off_v", self._limits[GATE]["voltage_low_v"])
        self.gate_v = self._pinch_off_v

    def require_above_pinch_off(self, lowest_v: float) -> None:
        """Raise InputError where the gate is to go below its pinch-off, which then cannot be where no current flows."""
        if lowest_v < self._pinch_off_v:
            raise InputError(
                f"bring-up: the gate is to go to {lowest_v:g} V, and the bench file says that {self._pinch_off_v:g} V "
                "pinches it off. One of them is wrong; with a pinch-off that is none the device would be on while it "
                "is thought to be off. The drain was not switched on"
            )

    def begin_released(self) -> None:
        """Take the drain off and see it released, whatever stood before; then program all trips, the gate's first."""
        self._access.supply(DRAIN).output(DRAIN, False)
        self._see_released()
        for bias in (GATE, DRAIN):
            limits = self._limits[bias]
            self._access.supply(bias).program_trips(
                bias,
                current_limit_a=limits["current_limit_a"],
                over_voltage_v=limits["over_voltage_v"],
                over_current=True,
            )

    def _see_released(self) -> None:
        below_v = self._limits[DRAIN].get("released_below_v", RELEASED_V)
        for _ in range(LOOKS):
            volts = self._access.read(f"{DRAIN}.voltage")
            if abs(volts) < below_v:
                return
            self._access.clock.sleep(LOOK_S)
        raise InstrumentError(
            f"bring-up: the drain is off and still at {volts:.2f} V (released is below {below_v:g} V). The gate was "
            "not touched. Look for a second supply on the drain line, or wait until its capacitors are empty."
        )

    def pinch_off(self) -> None:
        """Put the gate on at pinch-off, measured there."""
        self._access.set(f"{GATE}.voltage", self._pinch_off_v)
        self._access.supply(GATE).output(GATE, True)
        self._access.clock.sleep(PAUSE_S)
        self._see(GATE, self._pinch_off_v, "The drain was not switched on. Check the gate's line.")

    def raise_drain(self, target_v: float) -> None:
        """Put the drain on at the lowest voltage that the bench allows, and raise it with the gate pinched off."""
        start_v = max(0.0, self._limits[DRAIN]["voltage_low_v"])
        self._access.set(f"{DRAIN}.voltage", start_v)
        self._access.supply(DRAIN).output(DRAIN, True)
        for volts in steps(start_v, target_v, DRAIN_STEP_V):
            self._access.set(f"{DRAIN}.voltage", volts)
            self._access.clock.sleep(PAUSE_S)
            self.current_a()
        self._see(DRAIN, target_v, "Is its current limit reached, or a trip?")

    def raise_gate(self, target_v: float) -> None:
        """Move the gate to `target_v` in small steps."""
        for volts in steps(self.gate_v, target_v, GATE_STEP_V):
            self.move_gate(volts)

    def move_gate(self, volts: float) -> float:
        """Set the gate and return the drain current that flows."""
        self.gate_v = self._access.set(f"{GATE}.voltage", volts)
        self._access.clock.sleep(PAUSE_S)
        return self.current_a()

    def current_a(self) -> float:
        """Return the drain current. Raises InstrumentError at the bench's limit, or where a protection has tripped."""
        current_a = self._access.read(f"{DRAIN}.current")
        if not current_a < self._limits[DRAIN]["current_limit_a"]:
            raise InstrumentError(
                f"bring-up: drain current {current_a:.3g} A with the gate at {self.gate_v:.3f} V; the bench's limit is "
                f"{self._limits[DRAIN]['current_limit_a']:g} A. Is the gate connected, and is this the device that the "
                "recipe is for?"
            )
        for bias in (GATE, DRAIN):
            if self._access.supply(bias).tripped(bias):
                raise InstrumentError(
                    f"bring-up: the {bias}'s protection tripped: gate {self.gate_v:.3f} V, drain {current_a:.3g} A. "
                    "Find out why before the trip is cleared."
                )
        return current_a

    def _see(self, bias: str, wanted_v: float, advice: str) -> None:
        volts = self._access.read(f"{bias}.voltage")
        if not abs(volts - wanted_v) <= max(REACHED_V, REACHED_PART * abs(wanted_v)):
            raise InstrumentError(f"bring-up: the {bias} is at {volts:.2f} V, {wanted_v:.2f} V was set. {advice}")
