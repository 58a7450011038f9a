"""Levels of noise (METHODS section 5), and what a coupler must lose. Levels in dBm, ratios in dB, bandwidths in Hz."""

from __future__ import annotations

import math
from dataclasses import dataclass

#: Boltzmann constant in J/K (exact since 2019: CODATA 2018), and the standard noise temperature in K (IEEE).
BOLTZMANN, STANDARD_K = 1.380649e-23, 290.0


def thermal_floor_dbm(bandwidth_hz: float, noise_figure_db: float = 0.0) -> float:
    """Return the thermal noise in a bandwidth: kTB at 290 K, -173.975 dBm in 1 Hz, and the noise figure."""
    return 10.0 * math.log10(BOLTZMANN * STANDARD_K * bandwidth_hz / 1e-3) + noise_figure_db


def skirt_dbm(carrier_dbm: float, phase_noise_dbc_hz: float, bandwidth_hz: float) -> float:
    """Return what a carrier's phase-noise skirt puts into a filter: P + L(Delta) + 10 log10(B).

    L is that of IEEE Std 1139, flat over the filter.
    """
    return carrier_dbm + phase_noise_dbc_hz + 10.0 * math.log10(bandwidth_hz)


@dataclass(frozen=True, slots=True)
class Scatter:
    """Standard deviation of a ratio's magnitude (dB) and phase (degree)."""

    magnitude_db: float
    phase_deg: float


def scatter(signal_to_noise_db: float) -> Scatter:
    """Return how far noise scatters a reading: 20 log10(1 + s) dB and s rad with s = 10^(-SNR/20) / sqrt 2."""
    size = 10.0 ** (-signal_to_noise_db / 20.0) / math.sqrt(2.0)
    return Scatter(20.0 * math.log10(1.0 + size), math.degrees(size))


def main_line_loss_db(coupling_db: float) -> float:
    """Return what the main line of an ideal coupler loses: what it couples out, -10 log10(1 - 10^(-C/10))."""
    return -10.0 * math.log10(1.0 - 10.0 ** (-coupling_db / 10.0))
