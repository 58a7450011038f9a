"""Reflection of calibration standards: polynomial definitions with offset line and loss, ideal ones, measured ones."""

from __future__ import annotations

import io
import warnings
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from types import MappingProxyType
from typing import Any, Literal, Protocol

import numpy as np
import numpy.typing as npt

from benchrun.contract.capture import ComplexArray, FloatArray
from benchrun.derive.interpolation import interpolate, outside
from benchrun.errors import DataSetError
from benchrun.quantities import show

SHAPES = ("open", "short", "match")


class Definition(Protocol):
    """Whatever says what a standard reflects."""

    def reflection(self, frequency_hz: npt.ArrayLike, reference_ohm: float = 50.0) -> ComplexArray:
        """Return the complex reflection (F,) at `frequency_hz` (F,), referred to `reference_ohm`."""


@dataclass(frozen=True, slots=True)
class Standard:
    """An open, short or match behind an offset line, as a kit's label defines it. All zero: the ideal standard.

    The termination, with Zr the reference impedance:

        open    C(f) = C0 + C1 f + C2 f^2 + C3 f^3     Gt = (1 - j w C Zr) / (1 + j w C Zr)
        short   L(f) = L0 + L1 f + L2 f^2 + L3 f^3     Gt = (j w L - Zr) / (j w L + Zr)
        match   R + j w L(f)                           Gt = (R + j w L - Zr) / (R + j w L + Zr)

    The offset line of delay tau, loss in ohm/s at 1 GHz (skin effect) and characteristic impedance Z0:

        alpha l = (loss tau / 2 Z0) sqrt(f / 1e9)      beta l = w tau + alpha l
        Zc = Z0 + (1 - j) loss / (4 pi f) sqrt(f / 1e9)
        E  = exp(-2 (alpha l + j beta l))              G1 = (Zc - Zr) / (Zc + Zr)
        G  = [G1 (1 - E - G1 Gt) + E Gt] / [1 - G1 (E G1 + Gt (1 - E))]

    Source: the customary definition of coaxial standards; METHODS section 2; values for checks from the scikit-rf
    documentation.

    >>> short = Standard("short", delay_s=50e-12)
    >>> round(float(np.angle(short.reflection([1e9])[0], deg=True)), 6)
    144.0
    """

    kind: Literal["open", "short", "match"]
    delay_s: float = 0.0
    loss_ohm_per_s: float = 0.0
    line_impedance_ohm: float = 50.0
    capacitance: tuple[float, ...] = ()
    inductance: tuple[float, ...] = ()
    resistance_ohm: float = 50.0

    def reflection(self, frequency_hz: npt.ArrayLike, reference_ohm: float = 50.0) -> ComplexArray:
        """Return the reflection (F,) at `frequency_hz` (F,), referred to `reference_ohm`.

        Raises DataSetError where a frequency is not above zero.
        """
        f = np.atleast_1d(np.asarray(frequency_hz, dtype=np.float64))
        if not np.all(np.isfinite(f) & (f > 0.0)):
            raise DataSetError(f"a standard's definition holds above 0 Hz; {f[~(f > 0.0)][0]:g} Hz was asked for.")
        return self._behind_line(f, self._termination(f, reference_ohm), reference_ohm)

    def _termination(self, f: FloatArray, reference_ohm: float) -> ComplexArray:
        """Return Gt (F,)."""
        w = 2.0 * np.pi * f
        if self.kind == "open":
            y = 1j * w * _polynomial(self.capacitance, f) * reference_ohm
            return np.asarray((1.0 - y) / (1.0 + y))
        z = 1j * w * _polynomial(self.inductance, f) + (self.resistance_ohm if self.kind == "match" else 0.0)
        return np.asarray((z - reference_ohm) / (z + reference_ohm))

    def _behind_line(self, f: FloatArray, gt: ComplexArray, reference_ohm: float) -> ComplexArray:
        """Return G (F,): the termination seen through the offset line."""
        skin = np.sqrt(f / 1e9)
        alpha_l = self.loss_ohm_per_s * self.delay_s / (2.0 * self.line_impedance_ohm) * skin
        beta_l = 2.0 * np.pi * f * self.delay_s + alpha_l
        zc = self.line_impedance_ohm + (1 - 1j) * self.loss_ohm_per_s / (4.0 * np.pi * f) * skin
        e = np.exp(-2.0 * (alpha_l + 1j * beta_l))
        g1 = (zc - reference_ohm) / (zc + reference_ohm)
        return np.asarray((g1 * (1 - e - g1 * gt) + e * gt) / (1 - g1 * (e * g1 + gt * (1 - e))))


@dataclass(frozen=True, slots=True)
class MeasuredStandard:
    """A standard that is defined by data: reflection (G,) on a rising grid (G,), referred to `impedance_ohm`."""

    frequency_hz: FloatArray
    values: ComplexArray
    impedance_ohm: float = 50.0
    source: str = "data"

    def reflection(self, frequency_hz: npt.ArrayLike, reference_ohm: float = 50.0) -> ComplexArray:
        """Return the reflection (F,), interpolated by cubics and referred to `reference_ohm`.

        Raises DataSetError where the data do not reach: a definition is never extrapolated.
        """
        f = np.atleast_1d(np.asarray(frequency_hz, dtype=np.float64))
        if np.any(beyond := outside(self.frequency_hz, f)):
            raise DataSetError(
                f"{self.source}: its data run from {show(self.frequency_hz[0], 'frequency', 7)} to "
                f"{show(self.frequency_hz[-1], 'frequency', 7)}; {show(f[beyond][0], 'frequency', 7)} lies outside. "
                "Measure inside that range, or take another definition."
            )
        return refer(interpolate(self.frequency_hz, self.values, f), self.impedance_ohm, reference_ohm)


def refer(reflection: ComplexArray, from_ohm: float, to_ohm: float) -> ComplexArray:
    """Return `reflection` (any shape), known against `from_ohm`, against `to_ohm` (both real).

    With r = (to - from) / (to + from):  G' = (G - r) / (1 - r G).  Source: definition of the reflection coefficient.
    """
    r = (to_ohm - from_ohm) / (to_ohm + from_ohm)
    return np.asarray((reflection - r) / (1.0 - r * reflection))


def read_standard(name: str, text: str) -> MeasuredStandard:
    """Return the definition in the `text` of the one-port Touchstone file `name`. Raises DataSetError for another."""
    from skrf import Network

    source = io.StringIO(text)
    source.name = name
    try:
        with warnings.catch_warnings():
            warnings.simplefilter("ignore")  # what it would warn of is refused below
            network = Network(source)
    except Exception as error:  # the reader raises whatever its parsing meets
        raise DataSetError(f"{name}: cannot be read as Touchstone ({error}). Give a one-port .s1p file.") from error
    if network.nports != 1 or network.f.size == 0:
        raise DataSetError(
            f"{name}: holds {network.nports} ports and {network.f.size} frequencies; one port is needed."
        )
    if np.any(np.diff(network.f) <= 0.0) or not np.all(np.isfinite(network.s)):
        raise DataSetError(f"{name}: the frequencies must rise and every value must be a number.")
    return MeasuredStandard(network.f, network.s[:, 0, 0], float(network.z0[0, 0].real), name)


def define(description: Mapping[str, Any], files: Mapping[str, str] = MappingProxyType({})) -> Definition:
    """Return the definition that a kit's plain description means.

    Either {"kind": "open"|"short"|"match", "delay_s", "loss_ohm_per_s", "line_impedance_ohm", "capacitance",
    "inductance", "resistance_ohm"} in SI units, all but kind optional, or {"kind": "data", "file": name}, whose text
    is in `files`. Raises DataSetError for a kind that is none of these, and where the file is not there.
    """
    kind = description["kind"]
    if kind == "data":
        if description["file"] not in files:
            raise DataSetError(f"the kit's file {description['file']} is not there: put it beside the kit file.")
        return read_standard(description["file"], files[description["file"]])
    if kind not in SHAPES:
        raise DataSetError(f"'{kind}' is no kind of standard: {', '.join(SHAPES)} or data is expected.")
    plain = {k: v for k, v in description.items() if k in _FIELDS and v is not None}
    for name in ("capacitance", "inductance"):
        plain[name] = tuple(float(c) for c in plain.get(name, ()))
    return Standard(kind, **plain)


_FIELDS = ("delay_s", "loss_ohm_per_s", "line_impedance_ohm", "capacitance", "inductance", "resistance_ohm")


def _polynomial(coefficients: Sequence[float], f: FloatArray) -> FloatArray:
    """Return c0 + c1 f + c2 f^2 + ... (F,)."""
    return np.asarray(np.polynomial.polynomial.polyval(f, np.asarray(coefficients or (0.0,), dtype=np.float64)))
