"""Switch terms and two excitations: round trips, and what is refused."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from benchrun.derive.scattering import Waves
from benchrun.derive.switch_terms import add_switch_terms, from_excitations, read_switch_terms, remove_switch_terms
from benchrun.errors import DataSetError
from tests.derive import two_ports as make

F = np.linspace(2.18e9, 2.4e9, 5)


@given(st.integers(0, 10**6))
def test_removing_undoes_adding(seed):
    rng = np.random.default_rng(seed)
    ratios, forward, reverse = make.device(rng, (3, 5)), make.disc(rng, (3, 5), 0.2), make.disc(rng, 5, 0.2)
    again = remove_switch_terms(add_switch_terms(ratios, forward, reverse), forward, reverse)
    make.assert_equal(again, ratios.matrices(), 1e-11)


@given(st.integers(0, 10**6))
def test_any_two_independent_excitations_give_the_ratios(seed):
    """Both sources on at once in both excitations: only their ratio differs."""
    rng = np.random.default_rng(seed)
    ratios, a = make.device(rng, (3, 5)), 1.0 + make.disc(rng, (3, 5), 0.5)
    first, second = make.excite(ratios, a, 0.5 * a), make.excite(ratios, 0.3j * a, -a)
    make.assert_equal(from_excitations(first, second), ratios.matrices(), 1e-11)


@pytest.mark.parametrize("apart", [0.0, 5e-4])
def test_excitations_that_are_alike_are_refused_with_the_frequency(apart):
    rng = np.random.default_rng(1)
    ratios, a = make.device(rng, 5), np.ones(5, complex)
    first, second = (
        make.excite(ratios, a, 0.2 * a),
        make.excite(ratios, a, np.array([-1, -1, 0.2 + apart, -1, -1]) + 0j),
    )
    with pytest.raises(DataSetError, match=r"excitations are alike at 2\.29 GHz"):
        from_excitations(first, second, frequency_hz=F)


def test_no_numbers_and_no_waves_are_refused():
    rng = np.random.default_rng(2)
    waves = make.excite(make.device(rng, 5), np.ones(5, complex), np.zeros(5, complex))
    silent = waves._replace(b2=np.where(np.arange(5) == 1, 0.0, waves.b2))
    with pytest.raises(DataSetError, match=r"no wave came through at 2\.235 GHz"):
        read_switch_terms(silent, waves, frequency_hz=F)
    broken = waves._replace(b1=np.where(np.arange(5) == 4, np.nan, waves.b1))
    for call in (from_excitations, read_switch_terms):
        with pytest.raises(DataSetError, match=r"raw wave is no number at 2\.4 GHz"):
            call(broken, waves, frequency_hz=F)


def test_contradicting_switch_terms_are_refused():
    whole = np.ones(2, complex)
    ratios = make.flush_thru(2)
    with pytest.raises(DataSetError, match="contradict each other at frequency index 0"):
        remove_switch_terms(ratios, whole, whole)


def test_waves_keep_their_names():
    assert Waves._fields == ("a1", "b1", "a2", "b2")
