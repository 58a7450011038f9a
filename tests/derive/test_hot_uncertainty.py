"""Hot S22 and T22 with their uncertainty: against derivatives of the whole chain, and against repeated benches."""

from __future__ import annotations

import numpy as np
import pytest

from benchrun.derive.hot import two_sidebands
from benchrun.derive.hot_uncertainty import RawSidebands, hot_reflection
from benchrun.derive.one_port import ErrorTerms, solve
from benchrun.derive.one_port_uncertainty import terms_spread
from benchrun.derive.uncertainty import derivatives, inside, propagate, round_errors, together
from benchrun.errors import DataSetError
from tests.derive import two_ports as make


def sidebands(terms: ErrorTerms, s, t, probe, load) -> RawSidebands:
    """What is read of a hot device on a bench that reflects `load`: the waves solved, then the receivers' model."""
    # a+ = probe + load b+ ; a- = load b- ; b+ = s a+ + t a-* ; b- = s a- + t a+*
    k = np.conj(t * load / (1 - s * load))  # a-* = k a+
    a_upper = probe / (1 - load * (s + t * k))
    a_lower = np.conj(k * a_upper)
    pairs = [(a_upper, s * a_upper + t * np.conj(a_lower)), (a_lower, s * a_lower + t * np.conj(a_upper))]
    raw = []
    for a, b in pairs:
        reference = a - terms.e11 * b
        raw += [terms.e00 * reference + terms.e10e01 * b, reference]
    return RawSidebands(*raw)


def chain(a, b, c, *raw):
    terms = ErrorTerms(a, c, b + a * c)
    scale = np.ones(())
    (b_up, a_up), (b_low, a_low) = (terms.waves(raw[k], raw[k + 1], scale) for k in (0, 2))
    return two_sidebands(a_up, b_up, a_low, b_low)


def test_equals_derivatives_of_the_whole_chain():
    """Terms with a correlated spread that is not round, noise on all four waves, over drives and frequencies."""
    rng = np.random.default_rng(1)
    terms = make.port(rng, 5)
    s, t = make.disc(rng, (3, 5), 0.5), make.disc(rng, (3, 5), 0.3)
    raw = sidebands(terms, s, t, 0.01, 0.2j)
    j, q = (1e-3 * (rng.standard_normal((3, 3, 5)) + 1j * rng.standard_normal((3, 3, 5))) for _ in range(2))
    term_spread = propagate(round_errors(np.ones((3, 5))), j, q)
    readings = round_errors(np.array([1e-6, 2e-6, 3e-6, 4e-6])[:, None, None] * np.ones((3, 5)))
    found = hot_reflection(terms, raw, term_spread, readings)
    np.testing.assert_allclose(found.s22, s, rtol=0, atol=1e-12)
    np.testing.assert_allclose(found.t22, t, rtol=0, atol=1e-12)
    linear = terms.e00, terms.e10e01 - terms.e00 * terms.e11, terms.e11
    for drive in range(3):
        here = [w[drive] for w in raw]
        both = together(
            term_spread, round_errors(np.sqrt(np.einsum("ii...->i...", readings.covariance).real / 2)[:, drive])
        )
        expected = propagate(both, *derivatives(chain, [*linear, *here]))
        for which in (0, 1):
            ours = found.spread.plane(which)[drive]
            np.testing.assert_allclose(ours, expected.plane(which), rtol=1e-5, atol=1e-6 * ours.max())


def test_ellipses_hold_the_truth_over_repeated_benches():
    """Wrong standards, connections and noise: 95 in 100 for S22 and for T22."""
    rng = np.random.default_rng(2)
    benches = 4000

    def draw(size, *shape):
        return size * (rng.standard_normal((*shape, benches)) + 1j * rng.standard_normal((*shape, benches)))

    terms = ErrorTerms(*(np.full(benches, v) for v in (0.05 + 0.02j, 0.08j, 0.8 - 0.3j)))
    nominal = np.repeat(np.array([[1], [-1], [0], [1j], [-1j]], dtype=complex), benches, axis=1)
    ratios = terms.raw(nominal + draw(0.004, 5)) + draw(2e-4, 5)
    found = solve(ratios, nominal)
    spread = terms_spread(
        found, ratios, nominal, round_errors(np.full((5, benches), 0.004)), round_errors(np.full((5, benches), 2e-4))
    )
    s, t, noise = np.full(benches, 0.4 - 0.3j), np.full(benches, 0.2j), 1e-5
    raw = RawSidebands(*(w + draw(noise) for w in sidebands(terms, s, t, 0.01, 0.1)))
    result = hot_reflection(found, raw, spread, round_errors(np.full((4, benches), noise)))
    for which, error in ((0, result.s22 - s), (1, result.t22 - t)):
        held = np.mean(inside(error, result.spread, which=which))
        assert held == pytest.approx(0.95, abs=4 * np.sqrt(0.95 * 0.05 / benches))


def test_an_image_as_strong_as_the_probe_is_refused():
    terms = make.port(np.random.default_rng(3), 2)
    same = np.ones(2, complex)
    with pytest.raises(DataSetError, match="image is as strong"):
        hot_reflection(terms, RawSidebands(0.3 * same, same, 0.3 * same, same), round_errors(np.zeros((3, 2))))
