"""The simulated instruments, one file each, by the role that the wiring names."""

from __future__ import annotations

from ..scpi_instrument import Instrument
from .dc_supply import DcSupply
from .power_meter import PowerMeter
from .signal_source import SignalSource
from .thermometer import Thermometer
from .wave_receiver import WaveReceiver

BY_ROLE: dict[str, type[Instrument]] = {
    "wave-receiver": WaveReceiver,
    "signal-source": SignalSource,
    "power-meter": PowerMeter,
    "dc-supply": DcSupply,
    "thermometer": Thermometer,
}

__all__ = ["BY_ROLE", "DcSupply", "PowerMeter", "SignalSource", "Thermometer", "WaveReceiver"]
