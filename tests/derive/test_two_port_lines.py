"""TRL and multiline: what is refused before a solver sees it."""

from __future__ import annotations

import numpy as np
import pytest

from benchrun.derive.scattering import Scattering
from benchrun.derive.two_port_lines import solve_multiline, solve_trl
from benchrun.errors import DataSetError
from tests.derive import two_ports as make

F = np.linspace(2e9, 3e9, 5)


def parts(degrees):
    """Thru, short and a line of `degrees` (F,), as raw ratios."""
    rng = np.random.default_rng(1)
    terms, none = make.terms(rng, 5), np.zeros(5, complex)
    line = 0.98 * np.exp(-1j * np.deg2rad(degrees)) * np.ones(5)
    return terms, [
        terms.raw(s) for s in (make.flush_thru(5), make.reflects(5, ((-1, -1),))[0], Scattering(none, line, line, none))
    ]


def test_a_line_of_90_degrees_gives_the_ports():
    terms, (thru, short, line) = parts(90.0)
    found = solve_trl(thru, short, [line], F)
    np.testing.assert_allclose(found.k, terms.k, rtol=0, atol=1e-10)
    np.testing.assert_allclose(found.port_1.e10e01, terms.port_1.e10e01, rtol=0, atol=1e-10)
    np.testing.assert_array_equal(found.frequency_hz, F)


@pytest.mark.parametrize("degrees", [0.0, 5.0, 180.0, 175.0, 355.0])
def test_a_line_near_a_half_wave_is_refused_by_its_frequency(degrees):
    _, (thru, short, line) = parts(np.array([90.0, 90.0, 90.0, degrees, 90.0]))
    for call in (
        lambda: solve_trl(thru, short, [line], F),
        lambda: solve_multiline(thru, short, [line], F, [0.0, 0.03]),
    ):
        with pytest.raises(DataSetError, match=r"no line differs from the thru .* at 2\.75 GHz"):
            call()


def test_another_line_helps_where_one_is_a_half_wave():
    terms, (thru, short, half) = parts(np.array([90.0, 90.0, 90.0, 180.0, 90.0]))
    _, (_, _, quarter) = parts(60.0)
    found = solve_trl(thru, short, [half, quarter], F, line_guesses=[None, np.exp(-1j * np.deg2rad(60.0))])
    np.testing.assert_allclose(found.port_2.e11, terms.port_2.e11, rtol=0, atol=1e-9)


def test_what_does_not_fit_is_refused():
    _, (thru, short, line) = parts(90.0)
    nan = np.where(np.arange(5) == 3, np.nan, 1.0 + 0j)
    with pytest.raises(DataSetError, match="there is no line"):
        solve_trl(thru, short, [], F)
    with pytest.raises(DataSetError, match="sign is 0"):
        solve_trl(thru, short, [line], F, reflect_sign=0)
    with pytest.raises(DataSetError, match="2 guesses were given for 1 lines"):
        solve_trl(thru, short, [line], F, line_guesses=[None, None])
    with pytest.raises(DataSetError, match="1 lengths"):
        solve_multiline(thru, short, [line], F, [0.03])
    with pytest.raises(DataSetError, match=r"nothing came through at 2 GHz"):
        solve_trl(thru, short, [short], F)
    with pytest.raises(DataSetError, match=r"standard is no number at 2\.75 GHz"):
        solve_trl(thru, short, [line._replace(s21=nan)], F)
    with pytest.raises(DataSetError, match=r"reflect is no number at 2\.75 GHz"):
        solve_trl(thru, short._replace(s11=nan), [line], F)


def test_what_the_solver_stumbles_over_is_said_in_words():
    _, (thru, _, line) = parts(90.0)
    none = Scattering(*(np.zeros(5, complex) for _ in range(4)))
    with pytest.raises(DataSetError, match=r"reflect"):
        solve_trl(thru, none._replace(s11=np.full(5, 1e308 + 0j)), [line], F)
