"""Two-port correction against scikit-rf and open data: CHECKS rows 31 and 33, random ports, the thru's branch."""

from __future__ import annotations

import warnings
from pathlib import Path

import numpy as np
import pytest
import skrf
from skrf.calibration import SOLT, TRL, EightTerm, NISTMultilineTRL, UnknownThru
from skrf.calibration.calibration import unterminate

from benchrun.derive.one_port import solve
from benchrun.derive.scattering import Scattering, flush_thru
from benchrun.derive.switch_terms import (
    add_switch_terms,
    from_excitations,
    read_switch_terms,
    remove_switch_terms,
)
from benchrun.derive.two_port import TwoPortTerms
from benchrun.derive.two_port_lines import line_phases, solve_multiline, solve_trl
from benchrun.derive.two_port_solve import solve_standards, solve_thru, solve_unknown_thru
from tests.derive import two_ports as make

DATA = Path(__file__).parents[1] / "data"
BAND = skrf.Frequency(2.18, 2.4, 45, "GHz")
BANDS = [BAND, skrf.Frequency(10, 6000, 97, "MHz"), skrf.Frequency(0.01, 40, 801, "GHz")]


def theirs(kind, *args, **kwargs):
    """Run a scikit-rf calibration, whose warnings (no switch terms) are known."""
    with warnings.catch_warnings():
        warnings.simplefilter("ignore")
        found = kind(*args, **kwargs)
        found.run()
    return found


def assert_equal_terms(ours: TwoPortTerms, coefs: dict[str, np.ndarray], atol: float = 1e-12) -> None:
    for way, port in (("forward", ours.port_1), ("reverse", ours.port_2)):
        np.testing.assert_allclose(port.e00, coefs[f"{way} directivity"], rtol=0, atol=atol)
        np.testing.assert_allclose(port.e11, coefs[f"{way} source match"], rtol=0, atol=atol)
        np.testing.assert_allclose(port.e10e01, coefs[f"{way} reflection tracking"], rtol=0, atol=atol)
    np.testing.assert_allclose(ours.k, coefs["k"], rtol=0, atol=atol)


def ports_from(measured: list[Scattering], actual: list[Scattering]):
    one = solve(np.array([m.s11 for m in measured]), np.array([s.s11 for s in actual]))
    two = solve(np.array([m.s22 for m in measured]), np.array([s.s22 for s in actual]))
    return one, two


def read(name: str) -> skrf.Network:
    return skrf.Network(str(DATA / "trl_data" / name))


def test_row_33_switch_terms_are_removed():
    """Marks, 50th ARFTG 1997: GF .1 exp(1j), GR .08 exp(-.5j), S recovered to 1e-12."""
    rng = np.random.default_rng(33)
    truth = make.device(rng, 201)
    forward, reverse = np.full(201, 0.1 * np.exp(1j)), np.full(201, 0.08 * np.exp(-0.5j))
    read_as = add_switch_terms(truth, forward, reverse)
    assert np.abs(read_as.s11 - truth.s11).max() > 1e-3, "the terms must be there to be taken out"
    make.assert_equal(remove_switch_terms(read_as, forward, reverse), truth.matrices())


def test_row_33_by_waves():
    """The same from waves: a source at one port, the switch's termination at the other."""
    rng = np.random.default_rng(34)
    truth, whole = make.device(rng, 51), np.ones(51, complex)
    truth = truth._replace(s12=truth.s12 + 0.3)
    gf, gr = 0.1 * np.exp(1j), 0.08 * np.exp(-0.5j)
    forward = make.excite(truth, whole, gf * truth.s21 / (1 - truth.s22 * gf))
    reverse = make.excite(truth, gr * truth.s12 / (1 - truth.s11 * gr), whole)
    found = read_switch_terms(forward, reverse)
    np.testing.assert_allclose(found[0], gf, rtol=0, atol=1e-12)
    np.testing.assert_allclose(found[1], gr, rtol=0, atol=1e-12)
    ratios = Scattering(
        forward.b1 / forward.a1, reverse.b1 / reverse.a2, forward.b2 / forward.a1, reverse.b2 / reverse.a2
    )
    make.assert_equal(remove_switch_terms(ratios, *found), truth.matrices())
    make.assert_equal(from_excitations(forward, reverse), truth.matrices())


@pytest.mark.parametrize("seed", range(3))
def test_switch_terms_against_scikit_rf(seed):
    """scikit-rf's unterminate and terminate on random ratios, to 1e-12."""
    rng = np.random.default_rng(seed)
    ratios, gf, gr = make.device(rng, 45), make.disc(rng, 45, 0.2), make.disc(rng, 45, 0.2)
    networks = [skrf.Network(frequency=BAND, s=g) for g in (gf, gr)]
    make.assert_equal(remove_switch_terms(ratios, gf, gr), unterminate(make.network(ratios, BAND), *networks).s)
    terminated = skrf.calibration.calibration.terminate(make.network(ratios, BAND), *networks)
    make.assert_equal(add_switch_terms(ratios, gf, gr), terminated.s)


@pytest.mark.parametrize("band", BANDS, ids=str)
def test_known_thru_against_scikit_rf(band):
    """scikit-rf's SOLT and EightTerm on short, open, load and a flush thru without noise, and their correction."""
    rng = np.random.default_rng(5)
    terms, actual = make.terms(rng, band.npoints), make.standards(band.npoints)
    measured = [terms.raw(s) for s in actual]
    networks = [[make.network(m, band) for m in group] for group in (measured, actual)]
    ports = ports_from(measured[:3], actual[:3])
    ours = solve_thru(*ports, measured[3], actual[3])
    for other in (theirs(SOLT, *networks), theirs(EightTerm, *networks)):
        assert_equal_terms(ours, other.coefs)
        device = terms.raw(make.device(rng, band.npoints))
        make.assert_equal(ours.apply(device), other.apply_cal(make.network(device, band)).s, 3e-12)


@pytest.mark.parametrize(("seed", "noise"), [(1, 0.0), (2, 1e-4), (3, 1e-2)])
def test_joint_solution_against_scikit_rf(seed, noise):
    """scikit-rf's EightTerm on noisy, random two-ports as standards: the same least squares, to 1e-12."""
    rng = np.random.default_rng(seed)
    terms, points = make.terms(rng, BAND.npoints), BAND.npoints
    line = Scattering(*(np.full(points, v) for v in (0.05, 0.9j, 0.9j, -0.1 + 0j)))
    actual = [*make.reflects(points, ((1, -1), (-1, 0), (0, 1))), flush_thru(points), line]
    measured = [make.noisy(terms.raw(s), rng, noise) for s in actual]
    other = theirs(EightTerm, [make.network(m, BAND) for m in measured], [make.network(s, BAND) for s in actual])
    ours = solve_standards(measured, actual)
    assert_equal_terms(ours, other.coefs)
    device = make.device(rng, points)
    make.assert_equal(ours.apply(device), other.apply_cal(make.network(device, BAND)).s, 1e-11)
    make.assert_equal(ours.raw(device), other.embed(make.network(device, BAND)).s, 1e-11)


def embedding(rng, band):
    """Ports that turn with frequency as cables do, over the whole band."""
    w = 2 * np.pi * band.f
    terms = make.terms(rng, band.npoints)
    turn = np.exp(-1j * w * 1.7e-9)
    return TwoPortTerms(terms.port_1, terms.port_2, np.exp(-1j * w * 0.9e-9) * (0.7 + 0.1 * np.cos(w * 1e-10))), turn


@pytest.mark.parametrize("off_deg", [-80.0, -30.0, 0.0, 45.0, 85.0])
@pytest.mark.parametrize("band", BANDS, ids=str)
def test_unknown_thru_against_scikit_rf_across_the_branch(band, off_deg):
    """Ferrero, Pisani 1992: an adapter that turns many times over the band, its phase known to 85 degrees.

    scikit-rf's UnknownThru gives the same terms to 1e-12, and the adapter itself comes out.
    """
    rng = np.random.default_rng(17)
    terms, turn = embedding(rng, band)
    adapter = Scattering(0.2 * turn**2, 0.8 * turn, 0.8 * turn, -0.1 * turn)
    actual = make.reflects(band.npoints)
    measured = [terms.raw(s) for s in actual]
    thru = terms.raw(adapter)
    rough = np.angle(turn) + np.deg2rad(off_deg)
    ours = solve_unknown_thru(*ports_from(measured, actual), thru, rough)
    np.testing.assert_allclose(ours.k, terms.k, rtol=0, atol=1e-12)
    make.assert_equal(ours.apply(thru), adapter.matrices())
    guess = Scattering(0 * turn, np.exp(1j * rough), np.exp(1j * rough), 0 * turn)
    other = theirs(
        UnknownThru,
        [make.network(m, band) for m in (*measured, thru)],
        [make.network(s, band) for s in (*actual, guess)],
    )
    assert_equal_terms(ours, other.coefs)


def test_unknown_thru_with_noise_against_scikit_rf():
    """Four noisy reflects: both ports by least squares, k from the reciprocal thru, as scikit-rf has it."""
    rng = np.random.default_rng(8)
    terms, actual = make.terms(rng, 45), make.reflects(45, ((1, 1), (-1, -1), (0, 0), (0.7j, -0.8j)))
    measured = [make.noisy(terms.raw(s), rng, 1e-3) for s in actual]
    thru = make.noisy(terms.raw(flush_thru(45)), rng, 1e-3)
    ours = solve_unknown_thru(*ports_from(measured, actual), thru, 0.0)
    networks = [make.network(m, BAND) for m in (*measured, thru)]
    other = theirs(UnknownThru, networks, [make.network(s, BAND) for s in (*actual, flush_thru(45))])
    assert_equal_terms(ours, other.coefs)


@pytest.fixture(scope="module")
def trl():
    """Open data, its switch terms removed: (thru, reflect, line, mismatched line), frequencies, raw networks, terms."""
    networks = [read(f"{name}.s2p") for name in ("thru", "reflect", "line", "mismatched_line")]
    gf, gr = read("forward_switch_term.s1p"), read("reverse_switch_term.s1p")
    ratios = [remove_switch_terms(Scattering.of(n.s), gf.s[:, 0, 0], gr.s[:, 0, 0], frequency_hz=n.f) for n in networks]
    return ratios, networks[0].f, networks, (gf, gr)


def test_row_31_trl_open_data(trl):
    """scikit-rf documentation data (BSD-3), 75 to 110 GHz: thru, reflect and the mismatched line, and its solution."""
    (thru, reflect, line, mismatched), grid, networks, switch = trl
    ours = solve_trl(thru, reflect, [line], grid)
    corrected = ours.apply(thru)
    assert max(np.abs(corrected.s11).max(), np.abs(corrected.s21 - 1).max()) < 0.025
    assert np.median(np.abs(ours.apply(reflect).s11)) == pytest.approx(0.9999, abs=1e-3)
    found = ours.apply(mismatched)
    assert np.median(np.abs(found.s11) ** 2 + np.abs(found.s21) ** 2) == pytest.approx(0.999, abs=1e-3)
    other = theirs(TRL, measured=networks[:3], ideals=[None, -1, None], switch_terms=switch)
    assert_equal_terms(ours, other.coefs)
    make.assert_equal(found, other.apply_cal(networks[3]).s)


def test_row_31_by_the_joint_solution(trl):
    """What TRL found of reflect and line, given to our own least squares as definitions, gives TRL's terms."""
    (thru, reflect, line, _), grid, networks, switch = trl
    other = theirs(TRL, measured=networks[:3], ideals=[None, -1, None], switch_terms=switch)
    assert_equal_terms(
        solve_standards([thru, reflect, line], [Scattering.of(i.s) for i in other.ideals], frequency_hz=grid),
        other.coefs,
    )


def test_unknown_thru_on_open_data(trl):
    """The TRL data again: ports from reflects that TRL characterised, the line as the unknown thru."""
    (thru, reflect, line, mismatched), grid, _, _ = trl
    ours = solve_trl(thru, reflect, [line], grid)
    rough = np.angle(ours.apply(line).s21) + 1.0
    found = solve_unknown_thru(ours.port_1, ours.port_2, line, rough, frequency_hz=grid)
    np.testing.assert_allclose(np.abs(found.k / ours.k - 1), 0, atol=0.05)
    assert np.median(np.abs(found.k / ours.k - 1)) < 5e-3
    device = found.apply(line)
    np.testing.assert_allclose(device.s12, device.s21, rtol=0, atol=1e-12)
    assert np.median(np.abs(found.apply(mismatched).s21 - ours.apply(mismatched).s21)) < 5e-3


def lossy_lines(rng, grid, lengths_m):
    """Raw readings of lines of permittivity 2.25, with the ports' terms; a thru of no length first."""
    gamma = 2e-9 * grid + 2j * np.pi * grid / 299792458.0 * 1.5
    terms = make.terms(rng, grid.size)
    none = np.zeros(grid.size, complex)
    through = [np.exp(-gamma * length) for length in lengths_m]
    return terms, [terms.raw(Scattering(none, t, t, none)) for t in through], through


def test_multiline_against_scikit_rf():
    """scikit-rf's weighted multiline solution on lossy lines: its terms to 1e-12, the device to what noise leaves."""
    rng = np.random.default_rng(12)
    band = skrf.Frequency(1, 20, 96, "GHz")
    lengths = [0.0, 2.5e-3, 9e-3]
    terms, (thru, *lines), _ = lossy_lines(rng, band.f, lengths)
    short = terms.raw(make.reflects(96, ((-1, -1),))[0])
    ours = solve_multiline(thru, short, lines, band.f, lengths, permittivity_guess=2.25)
    networks = [make.network(m, band) for m in (thru, short, *lines)]
    other = theirs(NISTMultilineTRL, networks, [-1], lengths, er_est=2.25)
    assert_equal_terms(ours, other.coefs)
    device = make.device(rng, 96)
    make.assert_equal(ours.apply(terms.raw(device)), device.matrices(), 1e-6)


def test_several_lines_by_trl_recover_the_ports():
    """Two lines at once, one of them near 180 degrees in part of the band: the ports themselves come out."""
    rng = np.random.default_rng(13)
    grid = np.linspace(2e9, 18e9, 65)
    terms, (thru, *lines), through = lossy_lines(rng, grid, [0.0, 6e-3, 9e-3])
    open_ended = terms.raw(make.reflects(65, ((0.9j + 0.3, 0.9j + 0.3),))[0])
    found = solve_trl(thru, open_ended, lines, grid, reflect_sign=1, line_guesses=through[1:])
    for ours, truth in ((found.port_1, terms.port_1), (found.port_2, terms.port_2)):
        np.testing.assert_allclose(ours.e00, truth.e00, rtol=0, atol=1e-9)
        np.testing.assert_allclose(ours.e11, truth.e11, rtol=0, atol=1e-9)
    np.testing.assert_allclose(found.k, terms.k, rtol=0, atol=1e-9)


def test_line_phases_are_the_lines():
    """Engen, Hoer 1979: the eigenvalues of line over thru are exp(-/+ gamma l), whatever the ports do."""
    rng = np.random.default_rng(14)
    grid = np.linspace(1e9, 12e9, 23)
    _, (thru, line), through = lossy_lines(rng, grid, [0.0, 7e-3])
    turned = np.abs(np.angle(through[1] ** 2, deg=True)) / 2
    np.testing.assert_allclose(line_phases(thru, line), turned, rtol=0, atol=1e-9)
