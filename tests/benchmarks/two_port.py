"""Two-port correction against numpy.copyto of the same arrays, and solving against scikit-rf; ratios in one run.

Times are the process's own (CPU), so that what else a shared machine does counts little.
"""

from __future__ import annotations

import statistics
import time
import warnings
from collections.abc import Callable
from typing import Any, TypedDict

import numpy as np
import skrf
from skrf.calibration import EightTerm, TwoPortOnePath, UnknownThru

from benchrun.derive.one_path import OnePathTerms, Response, solve_one_path
from benchrun.derive.one_port import ErrorTerms, solve
from benchrun.derive.scattering import Scattering, Waves, flush_thru
from benchrun.derive.two_port import TwoPortTerms
from benchrun.derive.two_port_solve import solve_standards, solve_unknown_thru

WAVE_POINTS, SOLVE_POINTS = 10001, 1601
ROUNDS = 201


class Figure(TypedDict):
    """One figure, its bound (at most), and whether it holds."""

    name: str
    figure: float
    bound: float
    holds: bool


def figures() -> list[Figure]:
    """Return the figures of two-port application and of the solves."""
    rng = np.random.default_rng(3)
    return [*_application(rng), *_solves(rng)]


def _application(rng: np.random.Generator) -> list[Figure]:
    correction = _terms(rng, WAVE_POINTS).at_scale(30.0)
    raw, out = _waves(rng), _waves(rng)

    def copy() -> None:
        for source, target in zip(raw, out, strict=True):
            np.copyto(target, source)

    def apply() -> None:
        correction.apply(raw, out)

    ratio = _ratio([(_timed(apply), _timed(copy)) for _ in range(ROUNDS)])
    return [_at_most("two-port apply, four waves, 10001 points, preallocated: time, times numpy.copyto", ratio, 5.0)]


def _solves(rng: np.random.Generator) -> list[Figure]:
    """Return scikit-rf's time over ours, inverted so that a bound is an upper one; and the largest difference."""
    terms, frequency = _terms(rng, SOLVE_POINTS), skrf.Frequency(2.2, 2.4, SOLVE_POINTS, "GHz")
    none, whole = np.zeros(SOLVE_POINTS, complex), np.ones(SOLVE_POINTS, complex)
    actual = [*(Scattering(g * whole, none, none, g * whole) for g in (1, -1, 0)), flush_thru(SOLVE_POINTS)]
    measured = [terms.raw(s) for s in actual]
    raw, ideal = ([skrf.Network(frequency=frequency, s=s.matrices()) for s in group] for group in (measured, actual))

    def unknown() -> TwoPortTerms:
        one = _port([m.s11 for m in measured[:3]], [s.s11 for s in actual[:3]])
        two = _port([m.s22 for m in measured[:3]], [s.s22 for s in actual[:3]])
        return solve_unknown_thru(one, two, measured[3], 0.0)

    def one_path() -> OnePathTerms:
        one = _port([m.s11 for m in measured[:3]], [s.s11 for s in actual[:3]])
        return solve_one_path(one, Response(measured[3].s11, measured[3].s21), actual[3])

    cases: dict[str, tuple[Callable[[], Any], Callable[[], Any]]] = {
        "all standards at once": (lambda: solve_standards(measured, actual), lambda: EightTerm(raw, ideal)),
        "unknown thru": (unknown, lambda: UnknownThru(raw, ideal)),
        "one path": (one_path, lambda: TwoPortOnePath(raw, ideal, n_thrus=1, source_port=1)),
    }
    found = []
    for name, (ours, theirs) in cases.items():
        ratio = _ratio([(_timed(ours), _timed(lambda run=theirs: _run(run))) for _ in range(5)])
        found.append(_at_most(f"two-port solve, {name}, 1601 points: time, times scikit-rf's", ratio, 1 / 8))
    with_k = _run(cases["unknown thru"][1])["k"]
    worst = max(
        float(np.max(np.abs(cases[name][0]().k - with_k))) for name in ("all standards at once", "unknown thru")
    )
    return [*found, _at_most("two-port solve: largest difference of k to scikit-rf's", worst, 1e-12)]


def _run(build: Callable[[], Any]) -> dict[str, np.ndarray]:
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")  # it warns that there are no switch terms
        solver = build()
        solver.run()
    return dict(solver.coefs)


def _port(measured: list[np.ndarray], actual: list[np.ndarray]) -> ErrorTerms:
    return solve(np.array(measured), np.array(actual))


def _ratio(pairs: list[tuple[float, float]]) -> float:
    return statistics.median(t for t, _ in pairs) / statistics.median(t for _, t in pairs)


def _at_most(name: str, figure: float, bound: float) -> Figure:
    return {"name": name, "figure": figure, "bound": bound, "holds": figure <= bound}


def _timed(call: Callable[[], Any]) -> float:
    start = time.process_time()
    call()
    return time.process_time() - start


def _complex(rng: np.random.Generator, points: int, size: float) -> np.ndarray:
    return size * np.sqrt(rng.random(points)) * np.exp(2j * np.pi * rng.random(points))


def _waves(rng: np.random.Generator) -> Waves:
    return Waves(*(_complex(rng, WAVE_POINTS, 1.0) for _ in range(4)))


def _terms(rng: np.random.Generator, points: int) -> TwoPortTerms:
    one, two = (
        ErrorTerms(_complex(rng, points, 0.05), _complex(rng, points, 0.1), 0.8 + _complex(rng, points, 0.1))
        for _ in range(2)
    )
    return TwoPortTerms(one, two, 0.9 + _complex(rng, points, 0.1))


if __name__ == "__main__":
    for figure in figures():
        print(figure)
