"""read: tones, offsets, waves, signals, sweeps of the receiver's own."""

from __future__ import annotations

from typing import Any

import pytest
from benchrun_plugins.steps import read
from hypothesis import given
from hypothesis import strategies as st
from pydantic import ValidationError

from benchrun.contract.actions import ReadAction
from benchrun.errors import InputError

from .stand_ins import Scope

BOTH = {"probe.frequency": 2.3e9, "pump.frequency": 2.293e9}


def action(asked: dict[str, Any], **scope: Any) -> ReadAction:
    (found,) = read.expand(read.ReadModel.model_validate(asked), Scope(**scope))
    assert isinstance(found, ReadAction)
    return found


def test_the_hot_reading_of_the_example() -> None:
    found = action({"name": "hot", "tones": ["probe", "pump", "image"], "also": ["drain.current"]}, conditions=BOTH)
    assert found.capture is not None
    assert found.capture.tones == ("probe", "pump", "image")
    assert found.capture.offsets_hz == (0.0, -7e6, -14e6)
    assert found.capture.frequencies_hz == (2.3e9,)
    assert found.capture.waves == ("incident", "reflected")
    assert found.signals == ("pump", "probe")
    assert found.scalars == ("drain.current",)


def test_a_plain_reading_has_only_the_probe_on() -> None:
    found = action({"name": "standard"}, conditions=BOTH)
    assert found.capture is not None
    assert (found.capture.tones, found.capture.offsets_hz, found.signals) == (("probe",), (0.0,), ("probe",))


def test_without_waves_only_scalars_are_read_with_the_signals_on() -> None:
    found = action({"name": "levelling", "waves": [], "tones": ["pump"], "also": ["meter.power"]})
    assert found.capture is None
    assert (found.signals, found.scalars) == (("pump",), ("meter.power",))


def test_without_tones_rf_is_off() -> None:
    found = action({"name": "ambient", "tones": [], "also": ["ambient.temperature"]})
    assert (found.capture, found.signals) == (None, ())


def test_a_pump_read_alone_is_the_grid() -> None:
    found = action({"name": "leak", "tones": ["pump"]}, conditions={"pump.frequency": 2.1e9})
    assert found.capture is not None
    assert (found.capture.frequencies_hz, found.capture.offsets_hz, found.signals) == ((2.1e9,), (0.0,), ("pump",))


def test_the_receivers_own_sweep_needs_no_frequency_in_force() -> None:
    over = {"frequency": {"from": "2.18 GHz", "to": "2.4 GHz", "points": 89}}
    found = action({"name": "standard", "over": over})
    assert found.capture is not None
    grid = found.capture.frequencies_hz
    assert len(grid) == 89
    assert grid[1] - grid[0] == pytest.approx(2.5e6)
    assert (grid[0], grid[-1], found.capture.follow) == (2.18e9, 2.4e9, False)


def test_the_pump_follows_the_receivers_sweep_at_the_offset_in_force() -> None:
    over = {"frequency": {"from": "2.2 GHz", "to": "2.4 GHz", "points": 3}}
    asked = {"name": "hot", "tones": ["probe", "pump", "image"], "over": over, "follow": "pump"}
    found = action(asked, conditions={**BOTH, "pump.level": -3.0})
    assert found.capture is not None
    assert found.capture.follow
    assert found.capture.offsets_hz == (0.0, -7e6, -14e6)
    assert found.capture.levels_dbm == pytest.approx((-3.0, -3.1, -3.2))


@pytest.mark.parametrize("follow", [{}, {"follow": "probe"}])
def test_a_pump_that_would_stand_still_is_refused(follow: dict[str, str]) -> None:
    over = {"frequency": {"from": "2.2 GHz", "to": "2.4 GHz", "points": 3}}
    with pytest.raises(InputError, match="Write `follow: pump`"):
        action({"name": "hot", "tones": ["probe", "pump"], "over": over, **follow}, conditions=BOTH)


@pytest.mark.parametrize(
    ("asked", "says"),
    [
        ({"tones": ["prob"]}, "no prob on this bench"),
        ({"waves": ["forward"]}, "no forward on this bench; it has incident, reflected"),
        ({}, r"probe\.frequency has no value here"),
    ],
)
def test_what_the_bench_or_the_recipe_lacks_is_named(asked: dict[str, Any], says: str) -> None:
    with pytest.raises(InputError, match=says):
        action({"name": "hot", **asked})


@pytest.mark.parametrize(
    "asked",
    [
        {"tones": ["image"]},
        {"tones": ["probe", "image"]},
        {"tones": ["probe", "probe"]},
        {"waves": ["incident", "incident"]},
        {"follow": "pump", "tones": ["probe", "pump"]},
        {"over": {"frequency": {"from": "2.2 GHz", "to": "2.4 GHz", "points": 3}}, "follow": "pump"},
        {"over": {"frequency": {"from": "2.2 dBm", "to": "2.4 GHz", "points": 3}}},
        {"over": {"frequency": {"from": "2.2 GHz", "to": "2.4 GHz", "points": 0}}},
        {"over": {"drive": {"from": "2.2 GHz", "to": "2.4 GHz", "points": 3}}},
        {"also": ["drain current"]},
    ],
)
def test_readings_that_make_no_sense_are_refused_as_they_are_read(asked: dict[str, Any]) -> None:
    with pytest.raises(ValidationError):
        read.ReadModel.model_validate({"name": "hot", **asked})


@given(st.floats(1e8, 8e9), st.integers(4_000_000, 20_000_000_000).flatmap(lambda n: st.sampled_from([n, -n])))
def test_the_same_distance_is_the_same_number_at_every_frequency(probe_hz: float, millihertz: int) -> None:
    """Else the receiver would be set up anew at every point for nothing."""
    distance_hz = millihertz / 1000.0
    conditions = {"probe.frequency": probe_hz, "pump.frequency": probe_hz + distance_hz}
    found = action({"name": "hot", "tones": ["probe", "pump", "image"]}, conditions=conditions)
    assert found.capture is not None
    assert found.capture.offsets_hz == (0.0, distance_hz, 2.0 * distance_hz)


@pytest.mark.parametrize("distance_hz", [0.0, 200.0, -2999.0])
def test_an_image_within_the_if_filter_is_refused(distance_hz: float) -> None:
    conditions = {"probe.frequency": 2.3e9, "pump.frequency": 2.3e9 + distance_hz}
    with pytest.raises(InputError, match=f"{abs(distance_hz):g} Hz apart, and the IF bandwidth is 300 Hz"):
        action({"name": "hot", "tones": ["probe", "pump", "image"]}, conditions=conditions)
