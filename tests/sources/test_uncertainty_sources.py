"""Uncertainty against JCGM 100 and 101, the `uncertainties` package and tables: CHECKS rows 9 to 13, 17 and 19."""

from __future__ import annotations

import cmath

import numpy as np
import pytest
import uncertainties
from uncertainties import umath

from benchrun.derive.contributions import (
    mismatch_limits,
    mismatch_uncertainty,
    noise_of_ratio,
    reading_limits_db,
    residual_error,
)
from benchrun.derive.one_port import ErrorTerms, solve
from benchrun.derive.one_port_uncertainty import reflection_spread, terms_spread
from benchrun.derive.uncertainty import (
    coverage_factor,
    derivatives,
    monte_carlo,
    polar,
    propagate,
    real_errors,
    round_errors,
    together,
)

V, I, PHASE = 4.9990, 19.6610e-3, 1.04446
U = np.array([0.0032, 0.0095e-3, 0.00075])
R = np.array([[1, -0.36, 0.86], [-0.36, 1, -0.65], [0.86, -0.65, 1]])
COVARIANCE = (np.outer(U, U) * R)[..., None]


def impedance(v, i, phase):
    return v / i * np.exp(1j * phase)


def test_row_12_resistance_reactance_impedance():
    """JCGM 100 example H.2: R 127.732(71), X 219.847(295), Z 254.260(236) ohm, r(R, X) = -.588 (mem.).

    The example's inputs are printed with two digits of uncertainty: u to .002 ohm and r to .005 is what they give.
    """
    z = impedance(V, I, PHASE)
    spread = propagate(real_errors(COVARIANCE), *derivatives(impedance, [[V], [I], [PHASE]]))
    plane = spread.plane()[0]
    assert z.real == pytest.approx(127.732, abs=1e-3)
    assert z.imag == pytest.approx(219.847, abs=1e-3)
    assert np.sqrt(plane[0, 0]) == pytest.approx(0.071, abs=2e-3)
    assert np.sqrt(plane[1, 1]) == pytest.approx(0.295, abs=2e-3)
    assert plane[0, 1] / np.sqrt(plane[0, 0] * plane[1, 1]) == pytest.approx(-0.588, abs=5e-3)
    size = polar([z], spread)
    assert size.magnitude[0] == pytest.approx(254.260, abs=1e-3)
    assert size.magnitude_uncertainty[0] == pytest.approx(0.236, abs=2e-3)


def test_row_12_against_the_uncertainties_package():
    """The same example through `uncertainties`: covariance of R and X, and u(|Z|)."""
    v, i, phase = uncertainties.correlated_values([V, I, PHASE], COVARIANCE[..., 0])
    r, x = v / i * umath.cos(phase), v / i * umath.sin(phase)
    spread = propagate(real_errors(COVARIANCE), *derivatives(impedance, [[V], [I], [PHASE]]))
    np.testing.assert_allclose(spread.plane()[0], uncertainties.covariance_matrix([r, x]), rtol=1e-7)
    found = polar([impedance(V, I, PHASE)], spread)
    assert found.magnitude_uncertainty[0] == pytest.approx((v / i).std_dev, rel=1e-7)
    assert found.phase_uncertainty_rad[0] == pytest.approx(umath.atan2(x, r).std_dev, rel=1e-7)


def test_row_12_by_monte_carlo():
    """JCGM 101 on JCGM 100's example: nearly linear, so both agree to what 200 000 trials resolve."""
    mean, spread = monte_carlo(impedance, [[V], [I], [PHASE]], real_errors(COVARIANCE), 200_000, 1)
    assert abs(mean[0, 0] - impedance(V, I, PHASE)) < 5e-3
    linear = propagate(real_errors(COVARIANCE), *derivatives(impedance, [[V], [I], [PHASE]]))
    np.testing.assert_allclose(spread.plane(), linear.plane(), rtol=0.01)


def test_row_13_power_at_the_origin():
    """JCGM 101 section 9.4 (mem.): x1 = x2 = 0, u .005: mean and sd 50e-6; first order gives 0."""
    inputs = real_errors(np.diag([0.005**2] * 2)[..., None])

    def power(x1, x2):
        return x1**2 + x2**2

    linear = propagate(inputs, *derivatives(power, [[0.0], [0.0]]))
    assert abs(linear.covariance[0, 0, 0]) < 1e-24
    mean, spread = monte_carlo(power, [[0.0], [0.0]], inputs, 400_000, 2)
    assert mean[0, 0].real == pytest.approx(50e-6, rel=0.01)
    assert np.sqrt(spread.plane()[0, 0, 0]) == pytest.approx(50e-6, rel=0.01)


def test_magnitude_near_the_origin_is_marked():
    """Ridler, Salter, 56th ARFTG 2000: |G| alone is biased there (JCGM 101 9.4 is the same in power)."""
    spread = round_errors([[0.005, 0.005]])
    found = polar([0.0, 0.5], spread)
    np.testing.assert_array_equal(found.near_origin, [True, False])
    assert np.isinf(found.phase_uncertainty_rad[0])
    assert found.phase_uncertainty_rad[1] == pytest.approx(0.01)
    size, _ = monte_carlo(np.abs, [[0.0]], round_errors([[0.005]]), 100_000, 3)
    assert size[0, 0].real == pytest.approx(0.005 * np.sqrt(np.pi / 2), rel=0.01), "Rayleigh mean, not 0"


def test_row_10_mismatch_limits():
    """VSWR 1.5 and 1.2: +3.669 / -3.603 %, +.1565 / -.1594 dB (textbook formula)."""
    limits = mismatch_limits(0.5 / 2.5, 0.2 / 2.2)
    assert 100 * (limits.high - 1) == pytest.approx(3.669, abs=1e-3)
    assert 100 * (limits.low - 1) == pytest.approx(-3.603, abs=1e-3)
    assert 10 * np.log10(limits.high) == pytest.approx(0.1565, abs=1e-4)
    assert 10 * np.log10(limits.low) == pytest.approx(-0.1594, abs=1e-4)


def test_row_11_mismatch_uncertainty():
    """Harris, Warner, IEE Proc. H 128(1) 1981: 2.571 % for a product of .018182, and as the U's own variance."""
    assert 100 * mismatch_uncertainty(0.018182, 1.0) == pytest.approx(2.571, abs=1e-3)
    phases = np.exp(2j * np.pi * np.arange(3600) / 3600)
    power = np.abs(1 + 0.018182 * phases) ** 2
    assert np.std(power) == pytest.approx(float(mismatch_uncertainty(0.018182, 1.0)), rel=1e-3)


def test_row_17_noise_of_a_ratio():
    """40 dB: .061 dB, .405 degree; and so do draws of additive noise."""
    size_db, phase_rad = noise_of_ratio(40.0)
    assert size_db == pytest.approx(0.061, rel=0.01)
    assert np.rad2deg(phase_rad) == pytest.approx(0.405, rel=0.01)
    rng = np.random.default_rng(17)
    noise = 10 ** (-40 / 20) / np.sqrt(2) * (rng.standard_normal(100_000) + 1j * rng.standard_normal(100_000))
    assert np.std(np.angle(1 + noise)) == pytest.approx(float(phase_rad), rel=0.02)
    assert np.std(20 * np.log10(np.abs(1 + noise))) == pytest.approx(float(size_db), rel=0.02)


@pytest.mark.parametrize(
    ("true_db", "directivity_db", "low", "high"),
    [(30, 35, 26.12, 37.18), (20, 46, 19.58, 20.45), (26, 46, 25.17, 26.92), (30, 46, 28.72, 31.50)],
)
def test_rows_8_and_19_readings_through_a_directivity(true_db, directivity_db, low, high):
    """Vector sums (row 8's tolerance, .01 dB, on rounded values)."""
    error = residual_error(10 ** (-true_db / 20), 10 ** (-directivity_db / 20), 0.0, 0.0)
    limits = reading_limits_db(true_db, error)
    assert limits.low == pytest.approx(low, abs=0.011)
    assert limits.high == pytest.approx(high, abs=0.011)


def test_row_19_root_sum_of_squares():
    """30 dB through 35 dB in power: 28.81 dB, what the phases average to."""
    phases = np.exp(2j * np.pi * np.arange(360) / 360)
    raw = ErrorTerms(10 ** (-35 / 20) * phases, np.zeros(360, complex), np.ones(360, complex)).raw(
        np.full((1, 360), 10 ** (-30 / 20) + 0j)
    )
    assert -10 * np.log10(np.mean(np.abs(raw) ** 2)) == pytest.approx(28.81, abs=0.01)


@pytest.mark.parametrize("both_db", [20.0, 35.0, 46.0])
def test_row_9_directivity_equal_to_the_return_loss(both_db):
    """-6.02 dB one way, unbounded the other, and no crash."""
    limits = reading_limits_db(both_db, 10 ** (-both_db / 20))
    assert limits.low - both_db == pytest.approx(-6.02, abs=0.01)
    assert np.isposinf(limits.high)


def test_row_7_directivity_and_source_match():
    """20 dB through 35 dB and 30 dB: 18.55 to 21.73 dB, as D + M G^2 in first order (.02 dB of the whole sum)."""
    limits = reading_limits_db(20, residual_error(0.1, 10 ** (-35 / 20), 0.0, 10 ** (-30 / 20)))
    assert limits.low == pytest.approx(18.55, abs=0.02)
    assert limits.high == pytest.approx(21.73, abs=0.03)


def test_coverage_factor_of_two_quantities():
    """JCGM 102: 2.45 for 95 % of a complex quantity, against 1.96 for a real one."""
    assert coverage_factor(0.95) == pytest.approx(2.4477, abs=1e-4)


def test_one_port_against_the_uncertainties_package():
    """The whole correction, three standards and a device, written out in real numbers for `uncertainties`."""
    terms = ErrorTerms(np.array([0.05 + 0.02j]), np.array([0.1 - 0.03j]), np.array([0.9 * cmath.exp(0.4j)]))
    nominal = np.array([[1], [-1], [0]], dtype=complex)
    ratios, device = terms.raw(nominal), np.array([0.3 - 0.2j])
    u = [0.004, 0.003, 0.002]
    spread = terms_spread(terms, ratios, nominal, round_errors(np.array(u)[:, None]))
    ours = reflection_spread(terms, terms.raw(device), spread).plane()[0]

    class Complex:
        """Just enough complex arithmetic on uncertain real and imaginary parts."""

        def __init__(self, re, im=0.0):
            self.re, self.im = re, im

        def __add__(self, o):
            return Complex(self.re + o.re, self.im + o.im)

        def __sub__(self, o):
            return Complex(self.re - o.re, self.im - o.im)

        def __mul__(self, o):
            return Complex(self.re * o.re - self.im * o.im, self.re * o.im + self.im * o.re)

        def __truediv__(self, o):
            size = o.re * o.re + o.im * o.im
            return Complex((self.re * o.re + self.im * o.im) / size, (self.im * o.re - self.re * o.im) / size)

    g = [
        Complex(uncertainties.ufloat(n.real, s), uncertainties.ufloat(n.imag, s))
        for n, s in zip(nominal[:, 0], u, strict=True)
    ]
    m = [Complex(r.real, r.imag) for r in ratios[:, 0]]
    d = Complex(terms.raw(device)[0].real, terms.raw(device)[0].imag)
    # invariance of the cross-ratio under the bilinear model gives the device from three standards in closed form
    cross = (d - m[0]) * (m[1] - m[2]) / ((d - m[2]) * (m[1] - m[0]))
    left, right = g[1] - g[2], (g[1] - g[0]) * cross
    found = (g[0] * left - g[2] * right) / (left - right)
    assert complex(found.re.n, found.im.n) == pytest.approx(complex(device[0]), abs=1e-12)
    np.testing.assert_allclose(ours, uncertainties.covariance_matrix([found.re, found.im]), rtol=1e-8, atol=1e-14)


def test_one_port_by_monte_carlo():
    """JCGM 101 on the solver itself, five standards with correlated definitions and noisy readings."""
    rng = np.random.default_rng(5)
    terms = ErrorTerms(np.array([0.05 + 0.02j]), np.array([0.1 - 0.03j]), np.array([0.9 * np.exp(0.4j)]))
    nominal = np.array([[1], [-1], [0], [1j], [-0.9j]], dtype=complex)
    mixing = 0.001 * (rng.standard_normal((5, 5)) + 1j * rng.standard_normal((5, 5)))
    definitions = propagate(round_errors(np.ones((5, 1))), mixing[..., None], 0.5 * mixing.T[..., None])
    readings = round_errors(np.full((5, 1), 3e-4))
    ratios, device = terms.raw(nominal), np.array([0.4 + 0.5j])
    mean, drawn = monte_carlo(
        lambda *d: _corrected(d, nominal, ratios, terms.raw(device)),
        np.zeros((10, 1)),
        together(definitions, readings),
        20_000,
        6,
    )
    spread = terms_spread(terms, ratios, nominal, definitions, readings)
    linear = reflection_spread(terms, terms.raw(device), spread)
    assert abs(mean[0, 0] - device[0]) < 2e-4
    np.testing.assert_allclose(linear.plane()[0], drawn.plane()[0], rtol=0.05, atol=0.03 * drawn.plane()[0].max())


def _corrected(errors, nominal, ratios, raw):
    """Correct with a wrong definition and a noisy reading of each standard; trials stand where frequencies do."""
    wrong = np.array([e[:, 0] for e in errors])
    found = solve(ratios + wrong[5:], nominal + wrong[:5])
    return found.apply(np.broadcast_to(raw, wrong.shape[1:]))[:, None]
