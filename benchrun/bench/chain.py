"""Gain along the ways of a bench: small signal, nominal, vectorised over frequency. Sums of dB, without mismatch."""

from __future__ import annotations

from collections.abc import Sequence
from typing import TYPE_CHECKING

import numpy as np
import numpy.typing as npt

from benchrun.bench.ratios import FloatArray, OutsideTableError
from benchrun.errors import FileProblemsError, Problem

if TYPE_CHECKING:
    from benchrun.bench.model import Bench


def part_gain_db(bench: Bench, part: str, frequency_hz: npt.ArrayLike) -> FloatArray:
    """Return the gain of one part (dB, negative for a loss) in the shape of `frequency_hz`.

    Raises FileProblemsError naming the bench file where the part's table does not reach a frequency.
    """
    try:
        return bench.parts[part].transmission_db(np.asarray(frequency_hz, dtype=np.float64))
    except OutsideTableError as error:
        raise FileProblemsError([Problem(str(bench.path), 0, 0, f"part '{part}': {error}.")]) from None


def path_gain_db(bench: Bench, signal: str, frequency_hz: npt.ArrayLike) -> FloatArray:
    """Return the gain (dB) from a signal's instrument to its plane in the shape of `frequency_hz` (Hz).

    A coupler on the way counts with the loss of its main line. Raises as part_gain_db does.
    """
    return _along(bench, bench.signals[signal].path, frequency_hz)


def receiver_gain_db(bench: Bench, receiver: str, frequency_hz: npt.ArrayLike) -> FloatArray:
    """Return the gain (dB) from a coupler's main line to the input of a receiver: minus the coupling, then the arm.

    In the shape of `frequency_hz` (Hz). Raises as part_gain_db does.
    """
    described = bench.receivers[receiver]
    return _along(bench, described.path, frequency_hz) - bench.coupler(described.coupler).coupling


def _along(bench: Bench, parts: Sequence[str], frequency_hz: npt.ArrayLike) -> FloatArray:
    frequency = np.asarray(frequency_hz, dtype=np.float64)
    return np.asarray(sum((part_gain_db(bench, part, frequency) for part in parts), np.zeros_like(frequency)))
