"""One-path two-port: one source at port 1, a big pad at port 2, so forward terms only.

    m11 = ED + ER (S11 + X) / (1 - ES (S11 + X)) ,   X = S12 S21 EL / (1 - EL S22)

Corrected for source match alone, a reading still holds the load match EL; with the device turned round and read
again, all four parameters come out. Twelve terms, so for one source and a device that stays linear: never for a hot
reading. Sources: METHODS section 2; Marks, 50th ARFTG 1997; the one-path scheme as in scikit-rf's documentation.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from benchrun.contract.capture import ComplexArray, FloatArray
from benchrun.derive.one_port import ErrorTerms
from benchrun.derive.scattering import Scattering, refuse_where, require_numbers


class Response(NamedTuple):
    """What one orientation gives, each (..., F): reflection and transmission, corrected for source match only."""

    reflection: ComplexArray
    transmission: ComplexArray


@dataclass(frozen=True, slots=True)
class OnePathTerms:
    """The forward terms, each (F,) complex: the port's three, load match EL, transmission tracking ET, isolation EX.

    `frequency_hz` (F,) is for the messages.

    >>> port = ErrorTerms(np.array([0.02 + 0j]), np.array([0.05j]), np.array([0.9 + 0j]))
    >>> terms = OnePathTerms(port, np.array([0.1 + 0j]), np.array([0.7j]), np.array([1e-4 + 0j]))
    >>> device = Scattering(*(np.array([v]) for v in (0.1 + 0j, 0.02j, 3 - 1j, 0.3j)))
    >>> full = terms.both_ways(terms.raw(device), terms.raw(device.turned()))
    >>> bool(np.allclose(full, device, rtol=0, atol=1e-14))
    True
    """

    port: ErrorTerms
    load_match: ComplexArray
    transmission_tracking: ComplexArray
    isolation: ComplexArray
    frequency_hz: FloatArray | None = None

    def response(self, raw: Response) -> Response:
        """Return what `raw` = (m11, m21), each (..., F), gives in one orientation, corrected for source match only.

            reflection   = S11 + S12 S21 EL / (1 - EL S22)
            transmission = (m21 - EX) / ET * ER / (ER + ES (m11 - ED)) = S21 / (1 - EL S22)

        Raises DataSetError where no device fits.
        """
        require_numbers("a raw ratio", self.frequency_hz, *raw)
        tracking, match = self.port.e10e01, self.port.e11
        inside = tracking + match * (raw.reflection - self.port.e00)
        refuse_where(
            np.abs(inside) < 1e-12 * np.abs(tracking),
            self.frequency_hz,
            "no reflection fits the raw ratio at {at}: read it again.",
        )
        reflection = (raw.reflection - self.port.e00) / inside
        through = (raw.transmission - self.isolation) / self.transmission_tracking * tracking / inside
        return Response(np.asarray(reflection), np.asarray(through))

    def both_ways(self, forward: Response, turned: Response) -> Scattering:
        """Return all four parameters (..., F) from `forward` = (m11, m21) and the same with the device turned round.

        With the normalised readings f = (m11 - ED) / ER, t = (m21 - EX) / ET and ' the turned ones:

            D   = (1 + ES f)(1 + ES f') - t t' EL^2
            S11 = (f (1 + ES f') - EL t t') / D ,   S21 = t (1 + f' (ES - EL)) / D ,   and with ' changed over

        Raises DataSetError where no device fits. Source: the twelve-term solution with equal terms both ways.
        """
        require_numbers("a raw ratio", self.frequency_hz, *forward, *turned)
        f, t = self._normalised(forward)
        f_turned, t_turned = self._normalised(turned)
        match, load = self.port.e11, self.load_match
        seen, seen_turned = 1.0 + match * f, 1.0 + match * f_turned
        det = seen * seen_turned - t * t_turned * load**2
        refuse_where(
            np.abs(det) < 1e-12 * np.maximum(np.abs(seen * seen_turned), 1e-12),
            self.frequency_hz,
            "no device fits the two readings at {at}: was it really turned round in between?",
        )
        return Scattering(
            np.asarray((f * seen_turned - load * t * t_turned) / det),
            np.asarray(t_turned * (1.0 + f * (match - load)) / det),
            np.asarray(t * (1.0 + f_turned * (match - load)) / det),
            np.asarray((f_turned * seen - load * t * t_turned) / det),
        )

    def _normalised(self, raw: Response) -> tuple[ComplexArray, ComplexArray]:
        f = (raw.reflection - self.port.e00) / self.port.e10e01
        return np.asarray(f), np.asarray((raw.transmission - self.isolation) / self.transmission_tracking)

    def raw(self, device: Scattering) -> Response:
        """Return (m11, m21), each (..., F), that a device would be read as in the forward orientation."""
        behind = 1.0 - self.load_match * device.s22
        reflection = device.s11 + device.s12 * device.s21 * self.load_match / behind
        through = device.s21 / behind / (1.0 - self.port.e11 * reflection)
        return Response(self.port.raw(reflection), np.asarray(self.isolation + self.transmission_tracking * through))


def solve_one_path(
    port: ErrorTerms,
    raw: Response,
    thru: Scattering,
    *,
    isolation: ComplexArray | None = None,
    frequency_hz: FloatArray | None = None,
) -> OnePathTerms:
    """Return the forward terms from port 1's own standards and one known `thru` (F,), read as `raw` (m11, m21).

        G1 = port's correction of m11 ,    EL = (G1 - S11) / (S12 S21 + S22 (G1 - S11))
        ET = (m21 - EX) (1 - EL S22) (1 - ES G1) / S21

    `isolation` is m21 (F,) with both ports terminated, none for zero. Raises DataSetError where the thru lets nothing
    through.
    """
    require_numbers("the thru", frequency_hz, *raw, *thru)
    leak = np.zeros_like(port.e00) if isolation is None else np.asarray(isolation, np.complex128)
    require_numbers("the isolation", frequency_hz, leak)
    seen = port.apply(raw.reflection) - thru.s11
    both = thru.s12 * thru.s21 + thru.s22 * seen
    refuse_where(
        (thru.s21 == 0.0) | (both == 0.0) | (raw.transmission == leak),
        frequency_hz,
        "nothing came through at {at}: was the thru connected, and is its definition one?",
    )
    load = np.asarray(seen / both)
    tracking = (raw.transmission - leak) * (1.0 - load * thru.s22) * (1.0 - port.e11 * (seen + thru.s11)) / thru.s21
    return OnePathTerms(port, load, np.asarray(tracking), leak, frequency_hz)
