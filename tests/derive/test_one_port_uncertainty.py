"""One-port uncertainty against finite differences of the solver itself, and what is refused."""

from __future__ import annotations

import numpy as np
import pytest

from benchrun.derive.one_port import ErrorTerms, solve
from benchrun.derive.one_port_uncertainty import reflection_spread, sensitivity, terms_spread
from benchrun.derive.uncertainty import Spread, derivatives, inside, propagate, round_errors
from benchrun.errors import DataSetError
from tests.derive import two_ports as make

F = np.linspace(2.18e9, 2.4e9, 5)


def bench(rng, count=5):
    """Terms, nominal reflections and raw ratios of `count` standards, a device with drives, all over five points."""
    nominal = 0.95 * np.exp(2j * np.pi * (np.arange(count)[:, None] + 0.2 * rng.random((count, 5))) / count)
    nominal[0] *= 0.02
    terms = make.port(rng, 5)
    return terms, nominal, terms.raw(nominal), make.disc(rng, (3, 5), 0.9)


def some_spread(rng, n, size) -> Spread:
    j, q = (size * (rng.standard_normal((n, n, 5)) + 1j * rng.standard_normal((n, n, 5))) for _ in range(2))
    return propagate(round_errors(np.ones((n, 5))), j, q)


@pytest.mark.parametrize("count", [3, 4, 6])
def test_equals_numerical_derivatives_of_solve_and_apply(count):
    """Correlated, not round definitions and readings, carried through the solver by differences: the same planes."""
    rng = np.random.default_rng(count)
    terms, nominal, ratios, device = bench(rng, count)
    definitions, readings, own = some_spread(rng, count, 1e-3), some_spread(rng, count, 3e-4), some_spread(rng, 1, 2e-4)
    raw = terms.raw(device)[1]

    def corrected(*values):
        found = solve(np.array(values[:count]), np.array(values[count : 2 * count]))
        return found.apply(values[-1])

    j, q = derivatives(corrected, [*ratios, *nominal, raw])
    assert np.abs(q).max() < 1e-6, "the correction is analytic"
    expected = propagate(readings, j[:, :count]).plus(propagate(definitions, j[:, count : 2 * count]))
    expected = expected.plus(propagate(own, j[:, 2 * count :]))
    spread = terms_spread(terms, ratios, nominal, definitions, readings)
    found = reflection_spread(terms, raw, spread, own)
    np.testing.assert_allclose(found.plane(), expected.plane(), rtol=1e-5, atol=1e-5 * expected.plane().max())


def test_drives_and_frequencies_at_once():
    rng = np.random.default_rng(2)
    terms, nominal, ratios, device = bench(rng)
    spread = terms_spread(terms, ratios, nominal, some_spread(rng, 5, 1e-3))
    raw = terms.raw(device)
    whole = reflection_spread(terms, raw, spread, round_errors(np.full((1, 3, 5), 1e-4)))
    assert whole.covariance.shape == (1, 1, 3, 5)
    for k in range(3):
        one = reflection_spread(terms, raw[k], spread, round_errors(np.full((1, 5), 1e-4)))
        np.testing.assert_allclose(whole.plane()[k], one.plane(), rtol=1e-12, atol=0)


def test_the_ellipse_holds_the_truth():
    """Benches with wrong definitions, repeatability and noise: the 95 % ellipse holds the truth 95 times in 100."""
    rng = np.random.default_rng(9)
    benches = 4000
    terms = ErrorTerms(*(np.full(benches, v) for v in (0.05 + 0.02j, 0.08j, 0.8 - 0.3j)))
    nominal = np.repeat(np.array([[1], [-1], [0], [1j], [-1j]], dtype=complex), benches, axis=1)
    u = np.array([0.004, 0.004, 0.002, 0.006, 0.006])[:, None] * np.ones(benches)
    noise = 2e-4

    def draw(size, shape):
        return size * (rng.standard_normal(shape) + 1j * rng.standard_normal(shape))

    ratios = terms.raw(nominal + draw(u, nominal.shape)) + draw(noise, nominal.shape)
    found = solve(ratios, nominal)
    device = np.full(benches, 0.3 - 0.4j)
    raw = terms.raw(device) + draw(noise, benches)
    spread = terms_spread(found, ratios, nominal, round_errors(u), round_errors(np.full((5, benches), noise)))
    total = reflection_spread(found, raw, spread, round_errors(np.full((1, benches), noise)))
    held = np.mean(inside(found.apply(raw) - device, total))
    assert held == pytest.approx(0.95, abs=4 * np.sqrt(0.95 * 0.05 / benches))


@pytest.mark.parametrize("device", [0.0, 0.9, -0.5j, -1.0])
def test_sensitivity_of_open_short_match(device):
    """METHODS section 2: dG = -[dL (1-G^2) + dO G(G+1)/2 + dS G(G-1)/2] for errors of what the standards really are;
    the same with the other sign for errors of what they are said to be."""
    rng = np.random.default_rng(3)
    terms = make.port(rng, 5)
    osl = np.repeat(np.array([[1], [-1], [0]], dtype=complex), 5, axis=1)
    g = np.full(5, device + 0j)
    found = sensitivity(terms, terms.raw(osl), osl, g)
    np.testing.assert_allclose(found, [g * (g + 1) / 2, g * (g - 1) / 2, 1 - g**2], rtol=0, atol=1e-12)


def test_refusals():
    rng = np.random.default_rng(4)
    terms, nominal, ratios, _ = bench(rng)
    with pytest.raises(DataSetError, match="uncertainty of 4 standards was given for 5"):
        terms_spread(terms, ratios, nominal, round_errors(np.ones((4, 5))))
    with pytest.raises(DataSetError, match="three standards or more"):
        terms_spread(terms, ratios[:2], nominal[:2], round_errors(np.ones((2, 5))))
    alike = np.where(np.arange(5) == 2, nominal[1], nominal[:3])
    with pytest.raises(DataSetError, match=r"too alike at 2\.29 GHz"):
        terms_spread(terms, terms.raw(alike), alike, round_errors(np.ones((3, 5))), frequency_hz=F)
