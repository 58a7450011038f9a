"""The built-in drivers: generic instruments by SCPI-1999, one file and one dialect each."""

from __future__ import annotations

from benchrun.contract.hooks import DriverSpec

from . import dc_supply, power_meter, signal_source, thermometer, wave_receiver

DRIVERS: tuple[DriverSpec, ...] = (
    dc_supply.SPEC,
    power_meter.SPEC,
    signal_source.SPEC,
    thermometer.SPEC,
    wave_receiver.SPEC,
)
