"""The load that takes most power from a linearised hot device, and what any other load takes.

    b2 = B + S a2 + T' a2* ,   a2 = G b2        (METHODS section 1; phi is folded into B and T')

Everything here extrapolates from a probe that is 20 to 30 dB below what such a load reflects: say so beside each value.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from benchrun.contract.capture import ComplexArray, FloatArray
from benchrun.errors import DataSetError


class OptimumLoad(NamedTuple):
    """The optimum load's reflection (...) and the power that it takes, in watt (...)."""

    reflection: ComplexArray
    power_w: FloatArray


def has_optimum(s: ComplexArray, t: ComplexArray) -> npt.NDArray[np.bool_]:
    """Return where (...) delivered power has an interior maximum over all loads: |S| + |T'| < 1."""
    return np.asarray(np.abs(s) + np.abs(t) < 1.0)


def optimum_load(b: ComplexArray, s: ComplexArray, t: ComplexArray) -> OptimumLoad:
    """Return the load of most delivered power |b2|^2 - |a2|^2, for B in root-watt, S and T' (all ...).

        D = 1 - |S|^2 - |T'|^2
        b_opt = (D B + 2 S T' B*) / (D^2 - 4 |S T'|^2)
        Gamma_opt = S* + T' b_opt* / b_opt ,   P_max = Re(B* b_opt)

    Raises DataSetError where |S| + |T'| >= 1: power then grows towards the edge and no optimum exists.

    >>> load = optimum_load(np.array([10 + 0j]), np.array([0.4 + 0j]), np.array([0j]))
    >>> round(float(10 * np.log10(load.power_w[0] / 100)), 4)
    0.7572
    """
    if not np.all(has_optimum(s, t)):
        worst = float(np.max(np.abs(s) + np.abs(t)))
        raise DataSetError(
            f"|S22| + |T22| is {worst:.3f}, not below 1: delivered power has no maximum, and there is no optimum load."
        )
    d = 1.0 - np.abs(s) ** 2 - np.abs(t) ** 2
    b_opt = (d * b + 2.0 * s * t * np.conj(b)) / (d**2 - 4.0 * np.abs(s * t) ** 2)
    load = np.conj(s) + t * np.conj(b_opt) / b_opt
    return OptimumLoad(np.asarray(load), np.asarray(np.real(np.conj(b) * b_opt)))


def wave_into(load: ComplexArray, b: ComplexArray, s: ComplexArray, t: ComplexArray) -> ComplexArray:
    """Return b2 (...) in root-watt when the device works into the passive `load`.

    b2 = [(1 - S G)* B + T' G* B*] / (|1 - S G|^2 - |T' G|^2)
    """
    denominator = np.abs(1.0 - s * load) ** 2 - np.abs(t * load) ** 2
    return np.asarray((np.conj(1.0 - s * load) * b + t * np.conj(load) * np.conj(b)) / denominator)


def delivered_w(load: ComplexArray, b: ComplexArray, s: ComplexArray, t: ComplexArray) -> FloatArray:
    """Return the power (...) in watt that the passive `load` takes: |b2|^2 (1 - |G|^2)."""
    return np.asarray(np.abs(wave_into(load, b, s, t)) ** 2 * (1.0 - np.abs(load) ** 2))
