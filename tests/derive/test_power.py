"""|K| from incident and from absorbed power."""

from __future__ import annotations

import numpy as np
import pytest

from benchrun.derive.one_port import ErrorTerms
from benchrun.derive.power import scale_from_absorbed, scale_from_incident
from benchrun.errors import DataSetError
from tests.derive.virtual_bench import VirtualBench

F = np.linspace(2.18e9, 2.4e9, 23)
BENCH = VirtualBench()
E00, E11, TRACKING, K = BENCH.terms(F)
TERMS = ErrorTerms(E00, E11, TRACKING)
SENSOR = 0.15 * np.exp(-2j * np.pi * F * 1e-10)
A = 0.02 * np.exp(1j * F / 1e8)
M, R = BENCH.raw(SENSOR * A, A, F)


def test_incident_power():
    np.testing.assert_allclose(scale_from_incident(TERMS, M, R, np.abs(A) ** 2), K, rtol=1e-12)


@pytest.mark.parametrize("sensor", [SENSOR, np.abs(SENSOR), 0.15, None])
def test_absorbed_power_with_a_known_or_a_read_sensor(sensor):
    absorbed = np.abs(A) ** 2 * (1 - 0.15**2)
    np.testing.assert_allclose(scale_from_absorbed(TERMS, M, R, absorbed, sensor), K, rtol=1e-12)


def test_the_conventions_differ_by_the_sensor_mismatch():
    incident = scale_from_incident(TERMS, M, R, 1e-3)
    absorbed = scale_from_absorbed(TERMS, M, R, 1e-3)
    np.testing.assert_allclose((incident / absorbed) ** 2, 1 - 0.15**2, rtol=1e-12)


def test_no_power_no_reference_no_sensor():
    with pytest.raises(DataSetError, match="no power"):
        scale_from_incident(TERMS, M, R, np.zeros(F.size))
    with pytest.raises(DataSetError, match="read nothing"):
        scale_from_incident(TERMS, 0 * M, 0 * R, 1e-3)
    with pytest.raises(DataSetError, match="reflects everything"):
        scale_from_absorbed(TERMS, M, R, 1e-3, 1.0)
