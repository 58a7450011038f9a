"""Eight-term correction of a two-port on all four raw waves: the terms, and their application.

Each port is the 2x2 wave matrix of one_port.ErrorTerms; one ratio k ties the ports together and one scale makes the
waves absolute: seven ratios and a scale. It holds whatever sources are on, so also with pump and probe at once, where
twelve terms (one source on, a fixed termination behind the other port) do not. Crosstalk between the ports is not in
the model. The terms are solved in two_port_solve and two_port_lines. Source: METHODS section 2.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from benchrun.contract.capture import ComplexArray, FloatArray
from benchrun.derive.one_port import ErrorTerms
from benchrun.derive.scattering import Scattering, Waves, refuse_where, require_numbers

#: Points whose product is summed at once.
PIECE = 8192


@dataclass(frozen=True, slots=True)
class TwoPortTerms:
    """The seven ratios: three for each port, and k = K1 / K2 (F,) complex, the ratio of the receivers' scales.

    Model at port i, with r the raw reference (a) and m the raw measurement receiver (b), K2 = K1 / k:

        r_i = (a_i - e11_i b_i) / K_i ,     m_i = e00_i r_i + e10e01_i b_i / K_i

    `frequency_hz` (F,) is for the messages. Source: METHODS section 2; k as in Marks, 50th ARFTG 1997.

    >>> port = ErrorTerms(np.array([0.05 + 0j]), np.array([0.1j]), np.array([0.9 + 0j]))
    >>> terms = TwoPortTerms(port, port, np.array([0.8 + 0.1j]))
    >>> device = Scattering(*(np.array([v]) for v in (0.1 + 0j, 0.02j, 3 - 1j, 0.3j)))
    >>> bool(np.allclose(terms.apply(terms.raw(device)), device, rtol=0, atol=1e-14))
    True
    """

    port_1: ErrorTerms
    port_2: ErrorTerms
    k: ComplexArray
    frequency_hz: FloatArray | None = None

    def apply(self, ratios: Scattering) -> Scattering:
        """Return the device's parameters (..., F) behind raw ratios b = M a (..., F).

        M comes from switch_terms: from two excitations, or freed of the switch terms. For passive two-ports, or where
        the device stays linear. Raises DataSetError where no device fits.
        """
        require_numbers("a raw ratio", self.frequency_hz, *ratios)
        p = self._outgoing(ratios)
        q = (1.0 + self.port_1.e11 * p.s11, self.port_1.e11 * p.s12)
        r = (self.port_2.e11 * p.s21, 1.0 / self.k + self.port_2.e11 * p.s22)
        det = q[0] * r[1] - q[1] * r[0]
        size = np.abs(q[0] * r[1]) + np.abs(q[1] * r[0])
        refuse_where(
            ~(np.abs(det) > 1e-12 * size), self.frequency_hz, "no device fits the raw ratios at {at}: read them again."
        )
        return Scattering(
            np.asarray((p.s11 * r[1] - p.s12 * r[0]) / det),
            np.asarray((p.s12 * q[0] - p.s11 * q[1]) / det),
            np.asarray((p.s21 * r[1] - p.s22 * r[0]) / det),
            np.asarray((p.s22 * q[0] - p.s21 * q[1]) / det),
        )

    def _outgoing(self, m: Scattering) -> Scattering:
        """Return b / K1 for unit raw references: row i is (M - e00) / e10e01 times K_i / K1."""
        t1, t2 = self.port_1.e10e01, self.k * self.port_2.e10e01
        return Scattering(
            np.asarray((m.s11 - self.port_1.e00) / t1),
            np.asarray(m.s12 / t1),
            np.asarray(m.s21 / t2),
            np.asarray((m.s22 - self.port_2.e00) / t2),
        )

    def raw(self, device: Scattering) -> Scattering:
        """Return the raw ratios M (..., F), b = M a, that a device (..., F) would be read as."""
        n, d = self.predicted(device)
        det = d.determinant()
        return Scattering(
            np.asarray((n.s11 * d.s22 - n.s12 * d.s21) / det),
            np.asarray((n.s12 * d.s11 - n.s11 * d.s12) / (det * self.k)),
            np.asarray((n.s21 * d.s22 - n.s22 * d.s21) / det * self.k),
            np.asarray((n.s22 * d.s11 - n.s21 * d.s12) / det),
        )

    def predicted(self, device: Scattering) -> tuple[Scattering, Scattering]:
        """Return (N, D), (..., F): the raw b and the raw a at both ports, times K_i, for unit waves into the device."""
        s11, s12, s21, s22 = device
        (e1, t1), (e2, t2) = ((port.e11, port.e10e01 - port.e00 * port.e11) for port in (self.port_1, self.port_2))
        raw_b = (self.port_1.e00 + t1 * s11, t1 * s12, t2 * s21, self.port_2.e00 + t2 * s22)
        raw_a = (1.0 - e1 * s11, -e1 * s12, -e2 * s21, 1.0 - e2 * s22)
        return Scattering(*map(np.asarray, raw_b)), Scattering(*map(np.asarray, raw_a))

    def scale_at_port_1(self, scale_at_port_2: npt.NDArray[np.floating]) -> FloatArray:
        """Return |K1| (F,) from |K2| (F,): power.scale_from_incident gives either one, at the port with the meter."""
        return np.asarray(np.abs(self.k) * scale_at_port_2)

    def at_scale(self, scale: npt.ArrayLike) -> WaveCorrection:
        """Return the correction of raw waves with the scale K1 or |K1| (F,), without unit.

        Raises DataSetError where a scale is not a number above zero in magnitude, or a term no number.
        """
        for port in (self.port_1, self.port_2):
            require_numbers("an error term", self.frequency_hz, port.e00, port.e11, port.e10e01, self.k)
        k1 = np.broadcast_to(np.asarray(scale, np.complex128), np.broadcast_shapes(np.shape(scale), self.k.shape))
        refuse_where(
            ~(np.isfinite(k1) & (np.abs(k1) > 0.0)),
            self.frequency_hz,
            "the scale of the receivers is no number above zero at {at}: read the power meter again.",
        )
        first, second = _PortMatrix.of(self.port_1, k1), _PortMatrix.of(self.port_2, np.asarray(k1 / self.k))
        return WaveCorrection(first, second, self.frequency_hz)


class _PortMatrix(NamedTuple):
    """b = outgoing (m - e00 r) ,  a = scale (r + returned b): six passes, and no memory but the result's."""

    minus_e00: ComplexArray
    outgoing: ComplexArray
    returned: ComplexArray
    scale: ComplexArray

    @classmethod
    def of(cls, terms: ErrorTerms, scale: ComplexArray) -> _PortMatrix:
        values = (-terms.e00, scale / terms.e10e01, terms.e11 / scale, scale)
        return cls(*(np.ascontiguousarray(value) for value in values))

    def apply(self, r: ComplexArray, m: ComplexArray, a: ComplexArray, b: ComplexArray) -> None:
        """Fill a and b from r and m; whatever is no number in these ends up in a."""
        np.multiply(self.minus_e00, r, b)
        np.add(b, m, b)
        np.multiply(self.outgoing, b, b)
        np.multiply(self.returned, b, a)
        np.add(a, r, a)
        np.multiply(self.scale, a, a)


@dataclass(frozen=True, slots=True)
class WaveCorrection:
    """Eight terms and a scale, made ready: raw waves become waves at the planes of the device, in root-watt."""

    port_1: _PortMatrix
    port_2: _PortMatrix
    frequency_hz: FloatArray | None = None

    def apply(self, raw: Waves, out: Waves | None = None) -> Waves:
        """Return the waves (..., F) in root-watt behind `raw` (..., F), written into `out` where it is given.

        `out` must be contiguous and not share memory with `raw`. Raises DataSetError where a raw wave is no number.
        """
        if out is None:
            out = Waves(*(np.empty(raw.a1.shape, np.complex128) for _ in range(4)))
        with np.errstate(invalid="ignore", over="ignore"):
            self.port_1.apply(raw.a1, raw.b1, out.a1, out.b1)
            self.port_2.apply(raw.a2, raw.b2, out.a2, out.b2)
            sound = _all_numbers(out.a1.reshape(-1), out.a2.reshape(-1))
        if not sound:
            require_numbers("a raw wave", self.frequency_hz, *raw)
        return out


def _all_numbers(one: ComplexArray, two: ComplexArray) -> bool:
    """Return whether `one` and `two` (N,) are numbers throughout: their product's sum shows it in one pass.

    In pieces, because BLAS would wake its threads for a longer sum and wait for them.
    """
    total = 0j
    for first in range(0, one.size, PIECE):
        piece = slice(first, first + PIECE)
        total += complex(np.vdot(one[piece], two[piece]))
    return bool(np.isfinite(total))
