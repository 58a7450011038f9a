"""One-path two-port: both ways gives the device, one way says what it leaves in; what is refused."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from benchrun.derive.one_path import OnePathTerms, Response, solve_one_path
from benchrun.derive.scattering import Scattering, flush_thru
from benchrun.errors import DataSetError
from tests.derive import two_ports as make

F = np.linspace(2.18e9, 2.4e9, 5)


def terms(rng, points=5) -> OnePathTerms:
    return OnePathTerms(
        make.port(rng, points),
        make.disc(rng, points, 0.2),
        0.6 + make.disc(rng, points, 0.3),
        make.disc(rng, points, 1e-3),
        F if points == 5 else None,
    )


@given(st.integers(0, 10**6))
def test_both_ways_give_the_device(seed):
    rng = np.random.default_rng(seed)
    setup, device = terms(rng), make.device(rng, (3, 5))
    make.assert_equal(setup.both_ways(setup.raw(device), setup.raw(device.turned())), device.matrices(), 1e-11)


@given(st.integers(0, 10**6))
def test_any_known_thru_gives_the_terms(seed):
    rng = np.random.default_rng(seed)
    truth = terms(rng)
    thru = Scattering(*(v + make.disc(rng, 5, 0.2) for v in flush_thru(5)))
    found = solve_one_path(truth.port, truth.raw(thru), thru, isolation=truth.isolation, frequency_hz=F)
    for name in ("load_match", "transmission_tracking", "isolation"):
        np.testing.assert_allclose(getattr(found, name), getattr(truth, name), rtol=0, atol=1e-11)


def test_one_way_keeps_the_load_match():
    rng = np.random.default_rng(2)
    setup, device = terms(rng), make.device(rng, (3, 5))
    found = setup.response(setup.raw(device))
    tied = device.s21 / (1 - setup.load_match * device.s22)
    np.testing.assert_allclose(found.transmission, tied, rtol=0, atol=1e-12)
    np.testing.assert_allclose(found.reflection, device.s11 + device.s12 * setup.load_match * tied, rtol=0, atol=1e-12)
    assert np.abs(found.transmission - device.s21).max() > 0.01


def test_what_cannot_be_solved_is_refused_with_its_frequency():
    rng = np.random.default_rng(3)
    setup = terms(rng)
    thru = flush_thru(5)
    raw = setup.raw(thru)
    third = np.arange(5) == 2
    silent = raw._replace(transmission=np.where(third, setup.isolation, raw.transmission))
    with pytest.raises(DataSetError, match=r"nothing came through at 2\.29 GHz"):
        solve_one_path(setup.port, silent, thru, isolation=setup.isolation, frequency_hz=F)
    with pytest.raises(DataSetError, match=r"nothing came through at 2\.29 GHz"):
        solve_one_path(setup.port, raw, thru._replace(s21=np.where(third, 0, thru.s21)), frequency_hz=F)
    nan = raw._replace(reflection=np.where(third, np.nan, raw.reflection))
    for call in (
        lambda: solve_one_path(setup.port, nan, thru, frequency_hz=F),
        lambda: setup.response(nan),
        lambda: setup.both_ways(raw, nan),
    ):
        with pytest.raises(DataSetError, match=r"no number at 2\.29 GHz"):
            call()


def test_readings_that_no_device_gives_are_refused():
    setup = terms(np.random.default_rng(4))
    pole = Response(setup.port.e00 - setup.port.e10e01 / setup.port.e11, setup.isolation)
    with pytest.raises(DataSetError, match=r"no reflection fits the raw ratio at 2\.18 GHz"):
        setup.response(pole)
    with pytest.raises(DataSetError, match=r"no device fits the two readings at 2\.18 GHz"):
        setup.both_ways(pole, pole)
