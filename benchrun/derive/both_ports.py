"""Hot reflection solved at both ports: S22 and T22 freed of what the bench does at port 1, and S11, S12, T12 beside it.

A one-port hot reading is the output reflection with this bench at port 1. Where port 1 is read too, the whole small
signal response around the pump can be solved, for both sidebands and both ports (i = 1, 2):

    bi(+) = Si1 a1(+) + Ti1' a1(-)* + Si2 a2(+) + Ti2' a2(-)* ,   bi(-) the same with + and - changed over

T' = T exp(2j phi), phi = arg(a1) of the pump. Waves are in root-watt, corrected to the device's planes, "upper" at
f0 + Delta and "lower" at f0 - Delta, captured coherently. Sources: METHODS section 1; Verspecht, Williams, Schreurs,
Remley, McKinley, IEEE T-MTT 53(4) 2005, doi 10.1109/TMTT.2005.845771; Verspecht, Root, IEEE Microwave Mag. 7(3) 2006
(mem.).
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from benchrun.contract.capture import ComplexArray, FloatArray
from benchrun.derive.hot import two_sidebands
from benchrun.derive.least_squares import least_squares
from benchrun.derive.scattering import Scattering, Waves, refuse_where, require_numbers
from benchrun.errors import DataSetError

#: Share of a column's length that the other waves must leave over for probe states to be called independent.
LEAST_INDEPENDENCE = 0.01
#: Drives whose |a1| is nearer to the next one's than this share of it give no slope.
LEAST_STEP = 1e-3
#: Rounds at most, and by how much S and T may still move in the last: as good as still, or refused.
ROUNDS, SETTLED, UNSETTLED = 50, 1e-13, 1e-6


class HotTwoPort(NamedTuple):
    """A device's response to small waves beside its pump, without unit, each of S and T' (..., F)."""

    s: Scattering
    t: Scattering


class Residual(NamedTuple):
    """What a fit leaves, each (..., F): rms of b1 and b2 in root-watt, and how independent the probe states were."""

    b1: FloatArray
    b2: FloatArray
    independence: FloatArray


def from_probe_states(
    upper: Waves, lower: Waves, *, frequency_hz: FloatArray | None = None
) -> tuple[HotTwoPort, Residual]:
    """Return S and T' at both ports from N >= 2 probe states, waves (N, ..., F), equal at both sidebands.

    The states must differ at both ports: a probe at port 2 and one at port 1 (a weak tone beside the pump), or at
    port 2 with two different terminations of port 1. More are fitted by least squares. Raises DataSetError for fewer,
    and where they do not differ enough.
    """
    _require_states(upper, lower, 2, "two", frequency_hz)
    columns = np.concatenate([_columns(upper, lower), _columns(lower, upper)], axis=1)
    right = [np.concatenate(pair) for pair in ((upper.b1, lower.b1), (upper.b2, lower.b2))]
    return _fit(columns, right[0], right[1], frequency_hz)


def each_sideband(
    upper: Waves, lower: Waves, *, frequency_hz: FloatArray | None = None
) -> tuple[HotTwoPort, HotTwoPort]:
    """Return (at the upper, at the lower sideband) S and T', where they differ, from N >= 4 states (N, ..., F).

    Probe above and probe below the pump, each at either port, are four. At the upper sideband
    bi(+) = Si1(+) a1(+) + Ti1'(+) a1(-)* + ..., at the lower bi(-) = Si1(-) a1(-) + Ti1'(-) a1(+)* + ... .
    Raises DataSetError for fewer states, and where they do not differ enough.
    """
    _require_states(upper, lower, 4, "four", frequency_hz)
    above, _ = _fit(_columns(upper, lower), upper.b1, upper.b2, frequency_hz)
    below, _ = _fit(_columns(lower, upper), lower.b1, lower.b2, frequency_hz)
    return above, below


def with_drive_sweep(pump: Waves, upper: Waves, lower: Waves, *, frequency_hz: FloatArray | None = None) -> HotTwoPort:
    """Return S and T' at both ports from one probe at port 2 and the drive sweep itself, all waves (D, ..., F).

    What a small change of a1 does is the slope of the pump's own waves over the D >= 3 drives (drive_slope), less
    what a2 at the pump does to them; the rest of the sidebands is then a hot match at both ports. The two depend on
    each other and are solved in turns until nothing moves. Holds where the device answers a change of drive at Delta
    as it does a change of the sweep (no memory slower than Delta): from_probe_states does not need that. Raises
    DataSetError where drives are too few or too near, or it does not settle.
    """
    for waves in (pump, upper, lower):
        require_numbers("a wave", frequency_hz, *waves)
    s12, t12, s22, t22 = _output_columns(upper, lower, *np.zeros((4, 1)))
    with np.errstate(over="ignore", invalid="ignore"):  # what runs away is refused below
        for _ in range(ROUNDS):
            b1 = pump.b1 - s12 * pump.a2 - t12 * np.conj(pump.a2)
            b2 = pump.b2 - s22 * pump.a2 - t22 * np.conj(pump.a2)
            (s11, t11), (s21, t21) = (drive_slope(pump.a1, b, frequency_hz=frequency_hz) for b in (b1, b2))
            following = _output_columns(upper, lower, s11, t11, s21, t21)
            moved = np.max(np.abs(np.subtract(following, (s12, t12, s22, t22))), axis=0)
            s12, t12, s22, t22 = following
            if np.all(moved < SETTLED):
                break
    refuse_where(
        ~(moved < UNSETTLED),
        frequency_hz,
        "the two ports do not settle at {at}: what port 1 reflects is too strong there.",
    )
    return HotTwoPort(Scattering(s11, s12, s21, s22), Scattering(t11, t12, t21, t22))


def free_of_port_1(
    upper: Waves, lower: Waves, s11: ComplexArray, t11: ComplexArray, s21: ComplexArray, t21: ComplexArray
) -> HotTwoPort:
    """Return the whole response from one probe at port 2 where it is known what a small a1 does, all (..., F).

    bi(+) - Si1 a1(+) - Ti1' a1(-)* = Si2 a2(+) + Ti2' a2(-)*, and the same at the lower sideband, solved as in
    hot.two_sidebands. Raises DataSetError where the image is as strong as the probe.
    """
    s12, t12, s22, t22 = _output_columns(upper, lower, s11, t11, s21, t21)
    return HotTwoPort(Scattering(s11, s12, s21, s22), Scattering(t11, t12, t21, t22))


def drive_slope(
    a1: ComplexArray, wave: ComplexArray, *, frequency_hz: FloatArray | None = None
) -> tuple[ComplexArray, ComplexArray]:
    """Return (S, T'), each (D, ..., F): what a small change of a1 does to a `wave` = g(|a1|) a1, from D >= 3 drives.

        S = g + |a1| g' / 2 ,   T' = (|a1| g' / 2) exp(2j arg a1)

    g' from the parabola through three neighbouring drives. Raises DataSetError for fewer drives, and where two
    neighbours are all but equal in |a1|. Source: METHODS section 1, memoryless check.

    >>> a1 = np.array([[0.9], [1.0], [1.2]]) + 0j
    >>> s, t = drive_slope(a1, 10 * a1 - a1 * np.abs(a1) ** 2)
    >>> round(float(s[1, 0].real), 9), round(float(t[1, 0].real), 9)
    (8.0, -1.0)
    """
    if len(a1) < 3:
        raise DataSetError(f"{len(a1)} drives give no slope over the drive: three or more are needed.")
    size = np.abs(a1)
    steps = np.diff(size, axis=0)
    refuse_where(
        (np.abs(steps) <= LEAST_STEP * size[1:]) | (np.sign(steps) != np.sign(steps[:1])),
        frequency_hz,
        "the drives do not rise (or fall) in steps at {at}, so there is no slope over the drive.",
    )
    gain = np.asarray(wave / a1)
    half = size * _derivative(size, gain) / 2.0
    return np.asarray(gain + half), np.asarray(half * np.exp(2j * np.angle(a1)))


def _derivative(x: FloatArray, y: ComplexArray) -> ComplexArray:
    """Return dy/dx along the first axis, each point by the parabola through it and its two nearest neighbours."""
    first = np.clip(np.arange(len(x)) - 1, 0, len(x) - 3)
    x0, x1, x2 = (x[first + k] for k in range(3))
    d01, d12 = ((y[first + k + 1] - y[first + k]) / (x[first + k + 1] - x[first + k]) for k in range(2))
    curvature = (d12 - d01) / (x2 - x0)
    return np.asarray(d01 + curvature * (2.0 * x - x0 - x1))


def _output_columns(
    upper: Waves, lower: Waves, s11: ComplexArray, t11: ComplexArray, s21: ComplexArray, t21: ComplexArray
) -> tuple[ComplexArray, ComplexArray, ComplexArray, ComplexArray]:
    """Return (S12, T12', S22, T22') of what is left of b1 and b2 when the part of a1 is taken out."""
    found: list[ComplexArray] = []
    for b_upper, b_lower, s, t in ((upper.b1, lower.b1, s11, t11), (upper.b2, lower.b2, s21, t21)):
        left_upper = b_upper - s * upper.a1 - t * np.conj(lower.a1)
        left_lower = b_lower - s * lower.a1 - t * np.conj(upper.a1)
        found += two_sidebands(upper.a2, left_upper, lower.a2, left_lower)
    return found[0], found[1], found[2], found[3]


def _columns(here: Waves, image: Waves) -> ComplexArray:
    """Return the waves that make b at one sideband: (4, N, ..., F)."""
    return np.stack([here.a1, np.conj(image.a1), here.a2, np.conj(image.a2)])


def _fit(
    columns: ComplexArray, b1: ComplexArray, b2: ComplexArray, frequency_hz: FloatArray | None
) -> tuple[HotTwoPort, Residual]:
    one, two = least_squares(columns, b1), least_squares(columns, b2)
    refuse_where(
        ~(one.independence > LEAST_INDEPENDENCE),
        frequency_hz,
        "the probe states are too alike at {at} to solve both ports: probe once at port 2 and once at port 1, or "
        "change what port 1 is terminated with.",
    )
    rms = [
        np.asarray(np.sqrt(np.mean(np.abs(b - np.sum(columns * found.x[:, None], axis=0)) ** 2, axis=0)))
        for b, found in ((b1, one), (b2, two))
    ]
    (s11, t11, s12, t12), (s21, t21, s22, t22) = one.x, two.x
    hot = HotTwoPort(Scattering(s11, s12, s21, s22), Scattering(t11, t12, t21, t22))
    return hot, Residual(rms[0], rms[1], one.independence)


def _require_states(upper: Waves, lower: Waves, least: int, word: str, frequency_hz: FloatArray | None) -> None:
    require_numbers("a wave", frequency_hz, *upper, *lower)
    if len(upper.a1) < least:
        raise DataSetError(
            f"{len(upper.a1)} probe states do not solve both ports: {word} or more are needed, different at both ports."
        )
