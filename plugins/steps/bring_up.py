"""`bring-up`: trips, gate, drain, quiescent current, in the one order that a depletion device survives.

CAUTION: the drain never rises before the gate is seen at pinch-off, and the current is looked at after every step.
This is software: the bench's hardware interlock is what protects people and device when it fails.
"""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping
from typing import Any

from pydantic import Field, model_validator

from benchrun.contract.actions import Action, ProcedureAction, SetAction
from benchrun.contract.hooks import BenchAccess, StepScope, StepSpec
from benchrun.yaml_source import Strict

from .bias_search import BiasSearch, Window
from .bias_steps import DRAIN_STEP_V, GATE_STEP_V, PAUSE_S, DeviceBias, steps
from .quantity import Current, Voltage, Wait

KEY = "bring-up"
#: Modelled time of one step of a voltage with its look at the current (s), and of the trips and outputs together.
STEP_S = 0.010 + PAUSE_S
START_S = 0.1
#: How far a gate usually travels from pinch-off (V), and how many steps a search for the quiescent current takes.
USUAL_TRAVEL_V, USUAL_STEPS = 3.0, 6


class BringUpModel(Strict):
    """What the device is brought to."""

    gate: Voltage = Field(description="Gate voltage where the search starts, or to stay at without one.")
    drain: Voltage
    quiescent: Current | None = Field(None, description="Drain current without RF that the gate is moved for.")
    within: Current | None = Field(None, description="How near to it is near enough.")
    gate_range: tuple[Voltage, Voltage] | None = Field(None, description="The search never leaves this range.")
    soak: Wait | None = Field(None, description="Time at bias before the current is looked at once more.")

    @model_validator(mode="after")
    def _whole_search(self) -> BringUpModel:
        given = [self.quiescent is not None, self.within is not None, self.gate_range is not None]
        if any(given) and not all(given):
            raise ValueError("a search for the quiescent current needs all three: quiescent, within and gate-range.")
        return self


def expand(model: BringUpModel, scope: StepScope) -> Iterator[Action]:
    """Yield the procedure, and the drain voltage that stands after it. Raises InputError for what is not allowed."""
    found: dict[str, float | str | bool | None] = {
        "gate_v": scope.value(model.gate, "gate.voltage"),
        "drain_v": scope.value(model.drain, "drain.voltage"),
        "soak_s": model.soak or 0.0,
        "quiescent_a": None,
    }
    if model.quiescent is not None and model.within is not None and model.gate_range is not None:
        low_v, high_v = (scope.value(text, "gate.voltage") for text in model.gate_range)
        window = Window(
            wanted_a=scope.value(model.quiescent, "drain.current-limit"),
            within_a=scope.value(model.within, "drain.current-limit"),
            low_v=low_v,
            high_v=high_v,
        )
        window.check(float(found["gate_v"] or 0.0))
        found |= {"quiescent_a": window.wanted_a, "within_a": window.within_a}
        found |= {"gate_low_v": low_v, "gate_high_v": high_v}
    yield ProcedureAction(KEY, found)
    yield SetAction((("drain.voltage", float(found["drain_v"] or 0.0)),))


def execute(parameters: Mapping[str, Any], access: BenchAccess) -> Mapping[str, float]:
    """Bring the device up and return gate_v, drain_v, drain_a. Raises InstrumentError with what was found.

    Raises InputError, before anything is switched, where the bench file's pinch-off is none for these gate voltages.
    """
    bias = DeviceBias(access)
    bias.require_above_pinch_off(min(float(parameters["gate_v"]), float(parameters.get("gate_low_v", math.inf))))
    bias.begin_released()
    bias.pinch_off()
    bias.raise_drain(float(parameters["drain_v"]))
    bias.raise_gate(float(parameters["gate_v"]))
    search = None
    if parameters.get("quiescent_a") is not None:
        search = BiasSearch(bias, Window.of(parameters))
        search.run()
    if parameters.get("soak_s"):
        access.clock.sleep(float(parameters["soak_s"]))
        bias.current_a()
        if search is not None:
            search.run()
    return _report(bias, access)


def _report(bias: DeviceBias, access: BenchAccess) -> Mapping[str, float]:
    found = {"gate_v": bias.gate_v, "drain_v": access.read("drain.voltage"), "drain_a": bias.current_a()}
    access.say(f"gate {found['gate_v']:.3g} V, drain {found['drain_v']:.1f} V, {found['drain_a'] * 1e3:.0f} mA")
    return found


def duration_s(parameters: Mapping[str, Any]) -> float:
    """Return the time (s) that bringing up is expected to take."""
    drain_steps = len(steps(0.0, float(parameters["drain_v"]), DRAIN_STEP_V))
    gate_steps = len(steps(0.0, USUAL_TRAVEL_V, GATE_STEP_V))
    searched = USUAL_STEPS if parameters.get("quiescent_a") is not None else 0
    return START_S + STEP_S * (drain_steps + gate_steps + searched) + float(parameters.get("soak_s") or 0.0)


SPEC = StepSpec(
    key=KEY,
    model=BringUpModel,
    help="Bring up the device: {gate: -2.8 V, drain: 28 V, quiescent: 350 mA, within: 10 mA, gate-range: [-3 V, -2 V]}",
    expand=expand,
    execute=execute,
    duration_s=duration_s,
)
