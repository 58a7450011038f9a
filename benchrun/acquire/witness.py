"""A receiver as the second witness that RF is off: not only what the source says of itself."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np

from benchrun.contract.capture import Capture, ComplexArray, FloatArray
from benchrun.contract.roles import WaveReceiver

#: A tone is looked for where the last reading held at least this level at a receiver; far above any receiver's floor.
LOUD_DBM = -50.0
#: RF that is off is at least this much below what it was.
FALLEN_DB = 20.0


class Witness:
    """Remembers what the last reading saw, and looks whether that is gone."""

    def __init__(self, receiver: Callable[[], WaveReceiver]) -> None:
        self._receiver = receiver
        self._last: tuple[Capture, ComplexArray] | None = None

    def remember(self, capture: Capture, data: ComplexArray) -> None:
        """Keep a reading (T, W, P) to compare with."""
        self._last = capture, data

    def look(self) -> str | None:
        """Say which tone is still seen, "" for none, None where there was nothing loud to lose. Raises BenchError."""
        if self._last is None:
            return None
        capture, data = self._last
        before_dbm = _dbm(data[..., -1])
        if not np.any(before_dbm >= LOUD_DBM):
            return None
        now_dbm = _dbm(self._one_point(capture)[..., 0])
        seen = (before_dbm >= LOUD_DBM) & ~(now_dbm < before_dbm - FALLEN_DB)
        for tone, wave in np.argwhere(seen):
            return (
                f"receiver {capture.waves[wave]} still sees {now_dbm[tone, wave]:.1f} dBm at the {capture.tones[tone]}"
            )
        return ""

    def _one_point(self, capture: Capture) -> ComplexArray:
        receiver = self._receiver()
        receiver.configure(
            replace(capture, frequencies_hz=capture.frequencies_hz[-1:], averages=1, follow=False, levels_dbm=())
        )
        return receiver.acquire().data


def _dbm(waves: ComplexArray) -> FloatArray:
    """Return levels (T, W) in dBm of rms waves in root-watt; a wave of exactly nothing is far below everything."""
    return np.asarray(10.0 * np.log10(np.abs(waves) ** 2 + 1e-30) + 30.0)
