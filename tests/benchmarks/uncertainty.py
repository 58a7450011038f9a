"""What it costs to carry covariances: a night's points through the one-port and the hot chain, in CPU time."""

from __future__ import annotations

import time
from collections.abc import Callable
from typing import Any, TypedDict

import numpy as np

from benchrun.derive.hot_uncertainty import RawSidebands, hot_reflection
from benchrun.derive.one_port import ErrorTerms, solve
from benchrun.derive.one_port_uncertainty import reflection_spread, terms_spread
from benchrun.derive.uncertainty import Spread, round_errors

DRIVES, POINTS = 157, 1601


class Figure(TypedDict):
    """One figure, its bound (at most), and whether it holds."""

    name: str
    figure: float
    bound: float
    holds: bool


def figures() -> list[Figure]:
    """Return the CPU seconds of 250 000 points with covariance, calibration and its covariance included."""
    rng = np.random.default_rng(5)
    truth = ErrorTerms(*(_complex(rng, (POINTS,), size) for size in (0.05, 0.1, 0.1)))
    truth = ErrorTerms(truth.e00, truth.e11, 0.8 + truth.e10e01)
    standards = np.exp(2j * np.pi * np.arange(5) / 5)[:, None] * np.ones(POINTS)
    ratios = truth.raw(standards) + _complex(rng, standards.shape, 1e-4)
    raw = RawSidebands(*(_complex(rng, (DRIVES, POINTS), size) + least for size, least in _SIZES))
    reading, four = (round_errors(np.full((n, DRIVES, POINTS), 1e-5)) for n in (1, 4))

    def calibrated() -> tuple[ErrorTerms, Spread]:
        terms = solve(ratios, standards)
        unsure = round_errors(np.full((5, POINTS), 0.004))
        return terms, terms_spread(terms, ratios, standards, unsure, round_errors(np.full((5, POINTS), 1e-4)))

    def one_port() -> None:
        terms, spread = calibrated()
        reflection_spread(terms, raw.measured_upper / raw.reference_upper, spread, reading)

    def hot() -> None:
        terms, spread = calibrated()
        hot_reflection(terms, raw, spread, four)

    count = f"{DRIVES * POINTS} points"
    return [
        _at_most(f"one-port correction of {count} with covariance: CPU time in s", _cpu_s(one_port), 2.0),
        _at_most(f"hot S22 and T22 of {count} with covariance: CPU time in s", _cpu_s(hot), 2.0),
    ]


#: Spread and least value of the raw waves: measured and reference, at the probe and at its image.
_SIZES = ((0.2, 0.3), (0.1, 1.0), (0.01, 0.0), (0.01, 0.02))


def _at_most(name: str, figure: float, bound: float) -> Figure:
    return {"name": name, "figure": figure, "bound": bound, "holds": figure <= bound}


def _cpu_s(call: Callable[[], Any]) -> float:
    start = time.process_time()
    call()
    return time.process_time() - start


def _complex(rng: np.random.Generator, shape: tuple[int, ...], size: float) -> np.ndarray:
    return size * np.sqrt(rng.random(shape)) * np.exp(2j * np.pi * rng.random(shape))


if __name__ == "__main__":
    for figure in figures():
        print(figure)
