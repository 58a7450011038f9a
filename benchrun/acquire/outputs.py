"""What of a bench file the acquisition must know: what can drive something, and the limits of bias and scalars."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import TYPE_CHECKING

from benchrun.contract.kinds import UNIT_SUFFIX

if TYPE_CHECKING:
    from benchrun.bench.model import Bench, Bias

#: A drain counts as off below this voltage where the bench file says nothing else.
RELEASED_BELOW_V = 1.0
_ENDLESS = math.inf


@dataclass(frozen=True, slots=True)
class Outputs:
    """Signals with the instruments that make them, drains with the voltage below which they count as off, gates.

    `scalar_keys` gives the key under which a readable is kept ("drain.current" -> "drain.current_a"), `scalar_limits`
    the range outside which it is flagged, `bias_limits` what a procedure may know of each bias.
    """

    signals: Mapping[str, str]
    drains_below_v: Mapping[str, float]
    gates: tuple[str, ...]
    scalar_keys: Mapping[str, str]
    scalar_limits: Mapping[str, tuple[float, float]]
    bias_limits: Mapping[str, Mapping[str, float]]


def outputs_of(bench: Bench) -> Outputs:
    """Return what the acquisition must know of `bench`. A bias with a pinch-off is a gate, every other one a drain."""
    drains = {name: bias for name, bias in bench.bias.items() if bias.pinch_off is None}
    return Outputs(
        signals={name: signal.instrument for name, signal in bench.signals.items()},
        drains_below_v={name: bias.released_below or RELEASED_BELOW_V for name, bias in drains.items()},
        gates=tuple(name for name in bench.bias if name not in drains),
        scalar_keys={name: f"{name}_{UNIT_SUFFIX[one.kind]}" for name, one in bench.readables().items()},
        scalar_limits=_scalar_limits(bench),
        bias_limits={name: _bias_limits(bias) for name, bias in bench.bias.items()},
    )


def _scalar_limits(bench: Bench) -> dict[str, tuple[float, float]]:
    limits: dict[str, tuple[float, float]] = {}
    for name, bias in bench.bias.items():
        limits[f"{name}.voltage"] = bias.voltage
        limits[f"{name}.current"] = (-bias.current_limit, bias.current_limit)
    for name, instrument in bench.instruments.items():
        if instrument.sensor is not None:
            limits[f"{name}.power"] = (-_ENDLESS, instrument.sensor.linear)
    return limits


def _bias_limits(bias: Bias) -> dict[str, float]:
    limits = {
        "voltage_low_v": bias.voltage[0],
        "voltage_high_v": bias.voltage[1],
        "current_limit_a": bias.current_limit,
        "over_voltage_v": bias.over_voltage,
    }
    if bias.pinch_off is not None:
        limits["pinch_off_v"] = bias.pinch_off
    if bias.released_below is not None:
        limits["released_below_v"] = bias.released_below
    return limits
