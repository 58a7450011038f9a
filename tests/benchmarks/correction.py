"""One-port correction against bare numpy and against scikit-rf on a list of networks; ratios in one run."""

from __future__ import annotations

import statistics
import time
from collections.abc import Callable
from typing import Any, TypedDict

import numpy as np
import skrf
from skrf.calibration import OnePort

from benchrun.derive.one_port import ErrorTerms, solve

DRIVES, POINTS = 31, 1601
ROUNDS = 41


class Figure(TypedDict):
    """One figure, its bound (at most), and whether it holds."""

    name: str
    figure: float
    bound: float
    holds: bool


def figures() -> list[Figure]:
    """Return the figures of one-port correction on (31, 1601) raw ratios."""
    rng = np.random.default_rng(7)
    terms, raw = _terms(rng), _complex(rng, (DRIVES, POINTS), 0.5)
    frequency, standards = skrf.Frequency(2.2, 2.4, POINTS, "GHz"), _complex(rng, (4, POINTS), 1.0)
    theirs = OnePort(
        measured=[skrf.Network(frequency=frequency, s=row) for row in terms.raw(standards)],
        ideals=[skrf.Network(frequency=frequency, s=row) for row in standards],
    )
    theirs.run()
    ours, networks = solve(terms.raw(standards), standards), [skrf.Network(frequency=frequency, s=row) for row in raw]
    ours_s, bare_s = _interleaved(lambda: ours.apply(raw), lambda: _bare(ours, raw))
    list_s = _timed(lambda: [theirs.apply_cal(network) for network in networks])
    corrected = np.array([theirs.apply_cal(network).s[:, 0, 0] for network in networks])
    worst = float(np.max(np.abs(corrected - ours.apply(raw))))
    return [
        _at_most("one-port correction of (31, 1601): time, times the bare numpy expression", ours_s / bare_s, 1.3),
        _at_most("one-port correction: time, times scikit-rf's apply_cal on 31 networks", ours_s / list_s, 1 / 200),
        _at_most("one-port correction: largest difference to scikit-rf's apply_cal", worst, 1e-12),
    ]


def _at_most(name: str, figure: float, bound: float) -> Figure:
    return {"name": name, "figure": figure, "bound": bound, "holds": figure <= bound}


def _bare(terms: ErrorTerms, raw: np.ndarray) -> np.ndarray:
    a, c = terms.e00, terms.e11
    return (raw - a) / (terms.e10e01 - a * c + c * raw)


def _interleaved(first: Callable[[], Any], second: Callable[[], Any]) -> tuple[float, float]:
    """Return the median times of both, taken in turns, so that what else the machine does falls on both."""
    times = [(_timed(first), _timed(second)) for _ in range(ROUNDS)]
    return statistics.median(t for t, _ in times), statistics.median(t for _, t in times)


def _timed(call: Callable[[], Any]) -> float:
    start = time.perf_counter()
    call()
    return time.perf_counter() - start


def _complex(rng: np.random.Generator, shape: tuple[int, ...], size: float) -> np.ndarray:
    return size * np.sqrt(rng.random(shape)) * np.exp(2j * np.pi * rng.random(shape))


def _terms(rng: np.random.Generator) -> ErrorTerms:
    return ErrorTerms(
        _complex(rng, (POINTS,), 0.05), _complex(rng, (POINTS,), 0.1), 0.8 + _complex(rng, (POINTS,), 0.1)
    )


if __name__ == "__main__":
    for figure in figures():
        print(figure)
