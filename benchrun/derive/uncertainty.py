"""Uncertainty of complex quantities: covariance and pseudo-covariance, carried linearly or by Monte Carlo.

A complex error is not described by one number: how far it spreads is E|d|^2, and how far from round is E d^2. Both are
carried, so that the ellipse of any result is right. Sources: METHODS section 4; JCGM 100 and 102 (linear propagation);
JCGM 101 (Monte Carlo); Ridler, Salter, 56th ARFTG 2000, doi 10.1109/ARFTG.2000.327429 (complex results).
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import NamedTuple

import numpy as np
import numpy.typing as npt

from benchrun.contract.capture import ComplexArray, FloatArray
from benchrun.errors import DataSetError

Function = Callable[..., "npt.NDArray[np.generic] | Sequence[npt.NDArray[np.generic]]"]
#: Step of the numerical derivatives, as a share of the value's rms.
STEP = 1e-5


class Spread(NamedTuple):
    """What is known of the errors d of n complex quantities: C = E[d d^H] and P = E[d d^T], each (n, n, ..., F).

    In the quantities' unit squared. C is Hermitian, P symmetric; a round error has P = 0, a real one P = C.

    >>> spread = round_errors(np.array([[0.003], [0.004]]))
    >>> total = propagate(spread, np.array([[[1.0], [1.0]]]))
    >>> round(float(total.standard_uncertainty()[0, 0]), 6)
    0.005
    """

    covariance: ComplexArray
    pseudo: ComplexArray

    def standard_uncertainty(self) -> FloatArray:
        """Return sqrt(E|d|^2 / 2) (n, ..., F): that of real and imaginary part, where these are alike."""
        return np.asarray(np.sqrt(np.einsum("ii...->i...", self.covariance).real / 2.0))

    def plane(self, which: int = 0) -> FloatArray:
        """Return the real covariance (..., F, 2, 2) of (real, imaginary part) of one quantity:

        [(V + Re P) / 2, Im P / 2; Im P / 2, (V - Re P) / 2]
        """
        v, p = self.covariance[which, which].real, self.pseudo[which, which]
        rows = ((v + p.real) / 2.0, p.imag / 2.0), (p.imag / 2.0, (v - p.real) / 2.0)
        return np.stack([np.stack(row, axis=-1) for row in rows], axis=-2)

    def only(self, which: int) -> Spread:
        """Return the spread of one quantity, (1, 1, ..., F)."""
        part = slice(which, which + 1)
        return Spread(self.covariance[part, part], self.pseudo[part, part])

    def plus(self, other: Spread) -> Spread:
        """Return the spread of the sum of two independent errors of the same quantities."""
        return Spread(np.asarray(self.covariance + other.covariance), np.asarray(self.pseudo + other.pseudo))


def round_errors(standard_uncertainty: npt.ArrayLike) -> Spread:
    """Return the spread of n independent errors, each of `standard_uncertainty` u (n, ..., F) in its real and in its
    imaginary part: C = 2 u^2, P = 0. Raises DataSetError where an uncertainty is no number or negative.
    """
    u = np.asarray(standard_uncertainty, np.float64)
    if not np.all(u >= 0.0) or not np.all(np.isfinite(u)):
        raise DataSetError("a standard uncertainty is negative or no number: state it as zero or above.")
    covariance = np.zeros((u.shape[0], *u.shape), np.complex128)
    for k in range(u.shape[0]):
        covariance[k, k] = 2.0 * u[k] ** 2
    return Spread(covariance, np.zeros_like(covariance))


def real_errors(covariance: npt.ArrayLike) -> Spread:
    """Return the spread of n real quantities with `covariance` (n, n, ..., F): C = P."""
    values = np.asarray(covariance, np.complex128)
    return Spread(values, values)


def together(*spreads: Spread) -> Spread:
    """Return the spread of all the quantities of independent `spreads`, in their order."""
    sizes = [len(spread.covariance) for spread in spreads]
    shape = np.broadcast_shapes(*(spread.covariance.shape[2:] for spread in spreads))
    whole = Spread(*(np.zeros((sum(sizes), sum(sizes), *shape), np.complex128) for _ in range(2)))
    for spread, end in zip(spreads, np.cumsum(sizes), strict=True):
        part = slice(end - len(spread.covariance), end)
        whole.covariance[part, part], whole.pseudo[part, part] = spread
    return whole


def propagate(spread: Spread, jacobian: npt.ArrayLike, conjugate: npt.ArrayLike | None = None) -> Spread:
    """Return the spread of dy = J dx + J' dx* for the `spread` of x: J and J' are (m, n, ..., F), J' zero by default.

        C_y = J C J^H + J P J'^H + (J P J'^H)^H + J' C* J'^H
        P_y = J P J^T + J C J'^T + (J C J'^T)^T + J' P* J'^T

    Source: JCGM 102, in complex form.
    """
    j, (c, p) = np.asarray(jacobian, np.complex128), spread
    covariance, pseudo = _sandwich(j, c, np.conj(j)), _sandwich(j, p, j)
    if conjugate is not None:
        q = np.asarray(conjugate, np.complex128)
        cross, pseudo_cross = _sandwich(j, p, np.conj(q)), _sandwich(j, c, q)
        covariance += cross + np.conj(cross.swapaxes(0, 1)) + _sandwich(q, np.conj(c), np.conj(q))
        pseudo += pseudo_cross + pseudo_cross.swapaxes(0, 1) + _sandwich(q, np.conj(p), q)
    return Spread(covariance, pseudo)


def derivatives(function: Function, values: Sequence[npt.ArrayLike]) -> tuple[ComplexArray, ComplexArray]:
    """Return (J, J'), each (m, n, ..., F): what dx and dx* do to the m results of `function` of n complex `values`.

    By central differences along the real and the imaginary axis, good to about 1e-9 of the result for smooth
    functions; `function` takes n arrays (..., F) and returns one array or several.
    """
    point = [np.asarray(value, np.complex128) for value in values]
    columns: list[tuple[ComplexArray, ComplexArray]] = []
    for k, value in enumerate(point):
        h = STEP * (float(np.sqrt(np.mean(np.abs(value) ** 2))) or 1.0)
        along_real, along_imaginary = (_slope(function, point, k, step) for step in (h, 1j * h))
        columns.append(((along_real - 1j * along_imaginary) / 2.0, (along_real + 1j * along_imaginary) / 2.0))
    return np.stack([c[0] for c in columns], axis=1), np.stack([c[1] for c in columns], axis=1)


def monte_carlo(
    function: Function, values: Sequence[npt.ArrayLike], spread: Spread, trials: int, seed: int
) -> tuple[ComplexArray, Spread]:
    """Return the mean (m, ..., F) and the spread of the results of `function`, over `trials` of Gaussian errors.

    The same model as derivatives and propagate, without the linear step: where both differ, the linear one is not to
    be believed. `function` gets arrays (trials, ..., F). Source: JCGM 101.
    """
    if trials < 2:
        raise DataSetError(f"{trials} trials give no spread: ask for 10 000 or more.")
    draws = _draws(spread, trials, np.random.default_rng(seed))
    shifted = [np.asarray(value, np.complex128) + draw for value, draw in zip(values, draws, strict=True)]
    results = _results(function, shifted)
    mean = results.mean(axis=1)
    off = results - mean[:, None]
    c, p = (np.einsum("it...,jt...->ij...", off, other) / (trials - 1) for other in (np.conj(off), off))
    return mean, Spread(c, p)


def coverage_factor(probability: float) -> float:
    """Return k (about 2.45 for 0.95): the ellipse of k standard uncertainties holds a Gaussian complex error so often.

    k^2 = -2 ln(1 - p). Source: JCGM 102, table of coverage factors for two quantities.
    """
    if not 0.0 < probability < 1.0:
        raise DataSetError(f"a coverage probability of {probability:g} is none: say 0.95.")
    return float(np.sqrt(-2.0 * np.log1p(-probability)))


def inside(error: npt.ArrayLike, spread: Spread, probability: float = 0.95, which: int = 0) -> npt.NDArray[np.bool_]:
    """Return where (..., F) the complex `error` lies inside the ellipse of `probability` of one quantity."""
    d = np.asarray(error, np.complex128)
    xx, xy, yy = (spread.plane(which)[..., i, j] for i, j in ((0, 0), (0, 1), (1, 1)))
    det = xx * yy - xy**2
    distance = yy * d.real**2 - 2.0 * xy * d.real * d.imag + xx * d.imag**2
    return np.asarray(distance <= det * coverage_factor(probability) ** 2)


class Ellipse(NamedTuple):
    """An ellipse of errors, each (..., F): its half axes, and the angle of the longer one to the real axis in rad."""

    longer: FloatArray
    shorter: FloatArray
    angle_rad: FloatArray


def ellipse(spread: Spread, probability: float = 0.95, which: int = 0) -> Ellipse:
    """Return the ellipse that holds the error of one quantity with `probability`."""
    v, p = spread.covariance[which, which].real, spread.pseudo[which, which]
    k = coverage_factor(probability)
    longer, shorter = (k * np.sqrt(np.maximum(v + sign * np.abs(p), 0.0) / 2.0) for sign in (1.0, -1.0))
    return Ellipse(np.asarray(longer), np.asarray(shorter), np.asarray(np.angle(p) / 2.0))


class Polar(NamedTuple):
    """Magnitude and phase of a complex result with their standard uncertainties, each (..., F).

    `near_origin` marks where the magnitude is below three standard uncertainties of it: there it is biased upwards
    and the phase means little, so take the complex result.
    """

    magnitude: FloatArray
    magnitude_uncertainty: FloatArray
    phase_rad: FloatArray
    phase_uncertainty_rad: FloatArray
    near_origin: npt.NDArray[np.bool_]


def polar(value: npt.ArrayLike, spread: Spread, which: int = 0) -> Polar:
    """Return magnitude and phase of `value` (..., F), by turning the plane's axes along and across it.

    Source: Ridler, Salter, 56th ARFTG 2000.
    """
    z = np.asarray(value, np.complex128)
    v, p = spread.covariance[which, which].real, spread.pseudo[which, which]
    turned = (p * np.exp(-2j * np.angle(z))).real
    along, across = (np.sqrt(np.maximum(v + sign * turned, 0.0) / 2.0) for sign in (1.0, -1.0))
    size = np.abs(z)
    with np.errstate(divide="ignore", invalid="ignore"):
        phase = np.where(size > 0.0, across / size, np.inf)
    return Polar(size, np.asarray(along), np.asarray(np.angle(z)), phase, np.asarray(size < 3.0 * along))


def _sandwich(left: ComplexArray, middle: ComplexArray, right: ComplexArray) -> ComplexArray:
    """Return left middle right^T (m, m, ..., F), planar."""
    half = np.einsum("jk...,lk...->jl...", middle, right)
    return np.asarray(np.einsum("ij...,jl...->il...", left, half))


def _results(function: Function, values: Sequence[ComplexArray]) -> ComplexArray:
    found = function(*values)
    several = found if isinstance(found, (tuple, list)) else [found]
    return np.stack([np.asarray(part, np.complex128) for part in several])


def _slope(function: Function, point: Sequence[ComplexArray], which: int, step: complex) -> ComplexArray:
    ahead, behind = (
        _results(function, [value + sign * step if k == which else value for k, value in enumerate(point)])
        for sign in (1.0, -1.0)
    )
    return np.asarray((ahead - behind) / (2.0 * abs(step)))


def _draws(spread: Spread, trials: int, rng: np.random.Generator) -> ComplexArray:
    """Return Gaussian errors (n, trials, ..., F) of the given covariance and pseudo-covariance."""
    (c, p), n = spread, len(spread.covariance)
    xx, yy, xy = (c + p).real / 2.0, (c - p).real / 2.0, (p - c).imag / 2.0
    real = np.concatenate([np.concatenate([xx, xy], axis=1), np.concatenate([xy.swapaxes(0, 1), yy], axis=1)])
    values, vectors = np.linalg.eigh(np.moveaxis(real, (0, 1), (-2, -1)))
    root = vectors * np.sqrt(np.maximum(values, 0.0))[..., None, :]
    parts = np.einsum("...ij,t...j->it...", root, rng.standard_normal((trials, *values.shape)))
    return np.asarray(parts[:n] + 1j * parts[n:])
