"""Full names of what can be set and read on a bench."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

from benchrun.contract.kinds import Readable, Settable

if TYPE_CHECKING:
    from benchrun.bench.model import Bench

DRIVE = "drive"


def settables(bench: Bench) -> dict[str, Settable]:
    """Return what can be set, by full name, with the limits that the bench file gives (None: none given)."""
    found = [*_of_signals(bench), *_of_bias(bench), *_of_meters(bench)]
    if bench.drive_signal is not None:
        found.append(Settable(DRIVE, "level", f"power at the device-input plane, by {bench.drive_signal}.level"))
    return {one.name: one for one in found}


def _of_signals(bench: Bench) -> Iterator[Settable]:
    for name, signal in bench.signals.items():
        instrument = bench.instruments[signal.instrument]
        low_hz, high_hz = instrument.limits.frequency or (None, None)
        low_dbm, high_dbm = instrument.limits.level or (None, None)
        tops = [limit for limit in (high_dbm, instrument.ceiling) if limit is not None]
        yield Settable(f"{name}.frequency", "frequency", f"frequency of {name}", low_hz, high_hz)
        yield Settable(
            f"{name}.level", "level", f"level of {name} at {signal.instrument}", low_dbm, min(tops, default=None)
        )


def _of_bias(bench: Bench) -> Iterator[Settable]:
    for name, bias in bench.bias.items():
        yield Settable(f"{name}.voltage", "voltage", f"voltage of {name}", *bias.voltage)
        yield Settable(f"{name}.current-limit", "current", f"current limit of {name}", 0.0, bias.current_limit)


def _of_meters(bench: Bench) -> Iterator[Settable]:
    for name in bench.instruments:
        if bench.role(name) == "power-meter":
            yield Settable(f"{name}.frequency", "frequency", "frequency that the calibration factor is taken for")


def readables(bench: Bench) -> dict[str, Readable]:
    """Return the scalars that can be read, by full name."""
    found = []
    for name in bench.bias:
        found.append(Readable(f"{name}.voltage", "voltage", f"voltage of {name}, measured"))
        found.append(Readable(f"{name}.current", "current", f"current of {name}, measured"))
    for name in bench.instruments:
        if bench.role(name) == "power-meter":
            found.append(Readable(f"{name}.power", "level", "power incident on the sensor"))
        if bench.role(name) == "thermometer":
            found.append(Readable(f"{name}.temperature", "temperature", "temperature at the probe"))
    return {one.name: one for one in found}
