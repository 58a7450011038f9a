"""Levels in dBm and ratios in dB, and the powers, waves and voltages that they stand for."""

from __future__ import annotations

import math


def dbm_to_watts(level_dbm: float) -> float:
    """Return the power in watts of a level in dBm (0 dBm is 1 mW)."""
    return float(1e-3 * 10.0 ** (level_dbm / 10.0))


def watts_to_dbm(power_w: float) -> float:
    """Return the level in dBm of a power in watts; minus infinity for 0. Raises ValueError below 0."""
    if not power_w >= 0.0:
        raise ValueError(f"{power_w} W is no power")
    return 10.0 * math.log10(power_w / 1e-3) if power_w > 0.0 else -math.inf


def dbm_to_volts(level_dbm: float, impedance_ohm: float = 50.0) -> float:
    """Return the rms voltage that a level in dBm has across a real impedance: sqrt(P Z)."""
    return math.sqrt(dbm_to_watts(level_dbm) * impedance_ohm)


def volts_to_dbm(voltage_v: float, impedance_ohm: float = 50.0) -> float:
    """Return the level in dBm of an rms voltage across a real impedance; minus infinity for 0."""
    return watts_to_dbm(voltage_v * voltage_v / impedance_ohm)


def db_to_ratio(ratio_db: float) -> float:
    """Return the power ratio of a ratio in dB."""
    return float(10.0 ** (ratio_db / 10.0))


def ratio_to_db(ratio: float) -> float:
    """Return a power ratio in dB; minus infinity for 0. Raises ValueError below 0."""
    if not ratio >= 0.0:
        raise ValueError(f"{ratio} is no power ratio")
    return 10.0 * math.log10(ratio) if ratio > 0.0 else -math.inf


def db_to_voltage_ratio(ratio_db: float) -> float:
    """Return the wave (voltage) ratio of a ratio in dB."""
    return float(10.0 ** (ratio_db / 20.0))
