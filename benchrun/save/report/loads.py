"""What other loads would take, from a result's own columns: the device behind them, as its optimum load tells it."""

from __future__ import annotations

import numpy as np

from benchrun.contract.capture import ComplexArray, FloatArray
from benchrun.derive.results import Table

OPTIMUM, REFLECTION = "optimum_load_extrapolated", "output_reflection"
T22_PHASE = "t22_phase_from_twice_b2_pump_deg"


def has_loads(table: Table) -> bool:
    """Whether a table says enough: output reflection, complex T22, the optimum load and its power."""
    return {f"{OPTIMUM}_power_dbm", f"{OPTIMUM}_phase_deg", T22_PHASE} <= table.columns.keys()


def source_wave(table: Table) -> ComplexArray:
    """Return B (N,) in root-watt: the wave that the device sends into a match, up to its sign; NaN without an optimum.

    With the optimum load G and the wave b out of the device into it, |b|^2 = P / (1 - |G|^2), and since
    G = S* + T b*/b the phase of b is half of that of T / (G - S*). Then B = b - S G b - T (G b)*. The phase refers to
    the pump's wave out of the device, as T22 does.
    Source: METHODS section 1 (derive.optimum_load), solved backwards.
    """
    s, load = polar(table, REFLECTION), polar(table, OPTIMUM)
    t = _complex(table, "t22_magnitude_ratio", T22_PHASE)
    power_w = 1e-3 * 10.0 ** (table.columns[f"{OPTIMUM}_power_dbm"].astype(np.float64) / 10.0)
    return source_of(s, t, load, power_w)


def source_of(s: ComplexArray, t: ComplexArray, load: ComplexArray, power_w: FloatArray) -> ComplexArray:
    """Return B (...) as source_wave does, from S22, T22, the optimum load and its power in watt, all (...)."""
    away = load - np.conj(s)
    turned = np.where(np.abs(away) > 0.0, np.angle(t) - np.angle(away), 0.0)  # no quotient: both may be next to nothing
    b = np.sqrt(power_w / (1.0 - np.abs(load) ** 2)) * np.exp(0.5j * turned)
    return np.asarray(b - s * load * b - t * np.conj(load * b))


def polar(table: Table, name: str) -> ComplexArray:
    """Return the complex quantity (N,) behind the columns of a magnitude and a phase."""
    return _complex(table, f"{name}_magnitude_ratio", f"{name}_phase_deg")


def _complex(table: Table, magnitude: str, phase_deg: str) -> ComplexArray:
    angle = np.deg2rad(table.columns[phase_deg].astype(np.float64))
    return np.asarray(table.columns[magnitude].astype(np.float64) * np.exp(1j * angle))
