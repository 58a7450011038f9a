"""One-port calibration against scikit-rf and open data (CHECKS rows 27 to 29), and the trade on the match standard."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
import skrf
from skrf.calibration import OnePort

from benchrun.derive.one_port import ErrorTerms, solve

DATA = Path(__file__).parents[1] / "data"
ROW_27 = ErrorTerms(np.array([0.05 + 0.02j]), np.array([0.1 - 0.03j]), np.array([0.9 * np.exp(0.4j)]))


def read(folder: Path, names: list[str], pattern: str) -> list[skrf.Network]:
    return [skrf.Network(str(folder / pattern.format(name))) for name in names]


def values(networks: list[skrf.Network]) -> np.ndarray:
    return np.array([network.s[:, 0, 0] for network in networks])


def assert_equal_terms(ours: ErrorTerms, theirs: dict[str, np.ndarray], atol: float) -> None:
    np.testing.assert_allclose(ours.e00, theirs["directivity"], rtol=0, atol=atol)
    np.testing.assert_allclose(ours.e11, theirs["source match"], rtol=0, atol=atol)
    np.testing.assert_allclose(ours.e10e01, theirs["reflection tracking"], rtol=0, atol=atol)


@pytest.mark.parametrize("count", [3, 4])
def test_row_27_recovers_the_terms(count):
    """Bilinear solution, standards short, open, load and 0.5j (the first three: exact)."""
    actual = np.array([[-1], [1], [0], [0.5j]], dtype=complex)[:count]
    found = solve(ROW_27.raw(actual), actual)
    for name in ("e00", "e11", "e10e01"):
        assert abs(getattr(found, name) - getattr(ROW_27, name))[0] < 1e-12


def test_row_28_open_data_with_stored_terms():
    """scikit-rf (BSD-3), skrf/data/one_port.cal: 500 to 750 GHz, four standards, terms to 1e-12."""
    folder = DATA / "one_port_cal"
    names = ["short", "delay_short_132um", "delay_short_85um", "load"]
    measured, ideal = read(folder, names, "measured_{}.s1p"), read(folder, names, "ideal_{}.s1p")
    table = np.loadtxt(folder / "stored_error_coefficients.csv", delimiter=",")
    np.testing.assert_array_equal(table[:, 0], measured[0].f)
    found = solve(values(measured), values(ideal), names=names, frequency_hz=measured[0].f)
    stored = {
        "directivity": table[:, 1] + 1j * table[:, 2],
        "source match": table[:, 3] + 1j * table[:, 4],
        "reflection tracking": table[:, 5] + 1j * table[:, 6],
    }
    assert_equal_terms(found, stored, 1e-12)
    theirs = OnePort(measured=measured, ideals=ideal)
    theirs.run()
    assert_equal_terms(found, theirs.coefs, 1e-12)


def test_row_29_open_data_of_401_points():
    """scikit-rf documentation data (BSD-3), oneport_tiered: terms at 625 GHz and the residuals' rms."""
    folder, names = DATA / "oneport_tiered" / "tier1", ["short", "ds", "ro", "load"]
    measured, ideal = read(folder, names, "measured/{}.s1p"), read(folder, names, "ideals/{}.s1p")
    found = solve(values(measured), values(ideal), names=names, frequency_hz=measured[0].f)
    at = int(np.argmin(np.abs(measured[0].f - 625e9)))
    for term, magnitude, phase_deg in (
        (found.e00, 0.0732, -127.6),
        (found.e11, 0.1190, -82.8),
        (found.e10e01, 0.4938, -18.0),
    ):
        assert abs(term[at]) == pytest.approx(magnitude, abs=1e-3)
        assert np.angle(term[at], deg=True) == pytest.approx(phase_deg, abs=0.06)
    rms = np.sqrt(np.mean(np.abs(found.residuals(values(measured), values(ideal))) ** 2, axis=1))
    assert rms.min() == pytest.approx(0.003, abs=1e-3)
    assert rms.max() == pytest.approx(0.031, abs=1e-3)
    theirs = OnePort(measured=measured, ideals=ideal)
    theirs.run()
    assert_equal_terms(found, theirs.coefs, 1e-12)
    device = measured[1]
    np.testing.assert_allclose(found.apply(device.s[:, 0, 0]), theirs.apply_cal(device).s[:, 0, 0], rtol=0, atol=1e-12)


@pytest.mark.parametrize(("seed", "count"), [(1, 3), (2, 4), (3, 5), (4, 7)])
def test_random_standards_against_scikit_rf(seed, count):
    """scikit-rf's OnePort on random, noisy standards, solved and applied, to 1e-12."""
    rng = np.random.default_rng(seed)
    frequency = skrf.Frequency(2.18, 2.4, 45, "GHz")
    phases = 2 * np.pi * (np.arange(count)[:, None] + 0.3 * rng.random((count, 45))) / count
    ideal = 0.9 * np.exp(1j * phases)
    ideal[0] *= 0.05
    terms = ErrorTerms(*(0.1 * (rng.normal(size=(3, 45)) + 1j * rng.normal(size=(3, 45)))))
    terms = ErrorTerms(terms.e00, terms.e11, terms.e10e01 + 0.8)
    raw = terms.raw(ideal) + 1e-3 * (rng.normal(size=ideal.shape) + 1j * rng.normal(size=ideal.shape))
    theirs = OnePort(
        measured=[skrf.Network(frequency=frequency, s=m) for m in raw],
        ideals=[skrf.Network(frequency=frequency, s=i) for i in ideal],
    )
    theirs.run()
    ours = solve(raw, ideal)
    assert_equal_terms(ours, theirs.coefs, 1e-12)
    device = skrf.Network(frequency=frequency, s=rng.normal(size=45) + 1j * rng.normal(size=45))
    np.testing.assert_allclose(ours.apply(device.s[:, 0, 0]), theirs.apply_cal(device).s[:, 0, 0], rtol=0, atol=1e-12)


@pytest.mark.parametrize("seed", range(3))
def test_imperfect_standards_first_order(seed):
    """METHODS section 2: dG = -[dL (1-G^2) + dO G(G+1)/2 + dS G(G-1)/2], against the full computation."""
    rng = np.random.default_rng(seed)
    error = 1e-4 * (rng.normal(size=3) + 1j * rng.normal(size=3))
    nominal = np.array([[1], [-1], [0]], dtype=complex)
    d_open, d_short, d_load = error
    device = 0.9 * np.sqrt(rng.random(50)) * np.exp(2j * np.pi * rng.random(50))
    found = solve(ROW_27.raw(nominal + error[:, None]), nominal)
    corrected = found.apply(ROW_27.raw(device[:, None]))[:, 0]
    first_order = -(d_load * (1 - device**2) + d_open * device * (device + 1) / 2 + d_short * device * (device - 1) / 2)
    np.testing.assert_allclose(corrected - device, first_order, rtol=0, atol=1e-6)
    assert np.abs(first_order).max() > 3e-5


def test_the_match_sets_effective_directivity():
    """Common practice, no source: calibration takes 37 dB raw to about 47 dB, never beyond what the match reflects."""
    raw = ErrorTerms(np.array([10 ** (-37 / 20) + 0j]), np.array([0.05j]), np.array([1 + 0j]))
    nominal = np.array([[1], [-1], [0]], dtype=complex)
    actual = nominal + np.array([[0], [0], [10 ** (-47 / 20)]])
    found = solve(raw.raw(actual), nominal)
    effective_db = -20 * np.log10(np.abs(found.apply(raw.raw(np.zeros((1, 1), complex)))))[0, 0]
    assert effective_db == pytest.approx(47.0, abs=0.05)


def readings_db(true_db: float, directivity_db: float, source_match_db: float) -> tuple[float, float]:
    """Return the lowest and highest return loss that an uncorrected bridge reads, over all phases of its terms."""
    phases = np.exp(2j * np.pi * np.arange(360) / 360)
    e00 = 10 ** (-directivity_db / 20) * phases[:, None]
    e11 = 10 ** (-source_match_db / 20) * phases[None, :]
    raw = ErrorTerms(e00, e11, np.ones((1, 1), complex)).raw(np.full((1, 1), 10 ** (-true_db / 20) + 0j))
    loss_db = -20 * np.log10(np.abs(raw))
    return float(loss_db.min()), float(loss_db.max())


@pytest.mark.parametrize(
    ("true_db", "directivity_db", "source_match_db", "low", "high"),
    [
        (20, 35, 30, 18.55, 21.73),
        (20, 46, 400, 20 - 0.42, 20 + 0.45),
        (26, 46, 400, 26 - 0.83, 26 + 0.92),
        (30, 46, 400, 30 - 1.28, 30 + 1.50),
        (30, 35, 400, 26.12, 37.18),
    ],
)
def test_rows_7_8_and_19_by_the_error_model(true_db, directivity_db, source_match_db, low, high):
    """Vector sums: what directivity and source match make of a return loss that is read without correction."""
    assert readings_db(true_db, directivity_db, source_match_db) == pytest.approx((low, high), abs=0.011)
