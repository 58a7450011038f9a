"""Values of sweeps."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from benchrun.quantities import show
from benchrun.recipe.axis import AxisProblemsError, Evenly, read_axis

HZ = st.integers(1, 10**11).map(float)


def test_lists_and_ranges() -> None:
    assert list(read_axis("f", ["2 GHz", "2.4 GHz", "2.1 GHz"], None, settable=False).values) == [2e9, 2.4e9, 2.1e9]
    axis = read_axis("drive", {"from": "14 dBm", "to": "30 dBm", "step": "1 dB"}, "level", settable=True)
    assert list(axis.values) == [float(level) for level in range(14, 31)]
    down = read_axis("v", {"from": "28 V", "to": "27.7 V", "step": "0.1 V"}, None, settable=False)
    assert list(down.values) == pytest.approx([28.0, 27.9, 27.8, 27.7], abs=1e-12)
    assert down.values[-1] == 27.7
    assert list(read_axis("n", [1, 2.5], None, settable=False).values) == [1.0, 2.5]
    assert read_axis("t", ["20 degC", "30 degC"], None, settable=False).kind == "temperature"


def test_words() -> None:
    axis = read_axis("standard", ["open", "offset-short-1"], None, settable=False)
    assert (axis.kind, tuple(axis.values)) == ("text", ("open", "offset-short-1"))


def test_the_demo_grid_is_numpys() -> None:
    grid = read_axis("frequency", {"from": "2.2 GHz", "to": "2.4 GHz", "points": 81}, None, settable=False)
    assert np.array_equal(np.array(list(grid.values)), np.linspace(2.2e9, 2.4e9, 81))


@given(start=HZ, stop=HZ, count=st.integers(2, 2000))
def test_ranges_reach_both_ends_evenly(start: float, stop: float, count: int) -> None:
    given_ = {"from": show(start, "frequency"), "to": show(stop, "frequency"), "points": count}
    values = read_axis("f", given_, None, settable=False).values
    assert isinstance(values, Evenly)
    assert (len(values), values[0], values[-1]) == (count, start, stop)
    assert np.allclose(np.array(list(values)), np.linspace(start, stop, count), rtol=1e-12)
    assert values[: count // 2] == list(values)[: count // 2]
    assert values[-count] == start
    with pytest.raises(IndexError):
        values[count]


@given(start=st.integers(-600, 300), step=st.integers(1, 50), count=st.integers(2, 500), down=st.booleans())
def test_steps_of_tenths_end_where_they_say(start: int, step: int, count: int, down: bool) -> None:
    stop = start + (-1 if down else 1) * step * (count - 1)
    given_ = {"from": f"{start / 10} dBm", "to": f"{stop / 10} dBm", "step": f"{step / 10} dB"}
    values = read_axis("drive", given_, "level", settable=True).values
    assert len(values) == count
    assert values[-1] == stop / 10


@given(step=st.integers(2, 40), count=st.integers(2, 100), short=st.data())
def test_steps_that_do_not_end_there_are_told(step: int, count: int, short: st.DataObject) -> None:
    by = short.draw(st.integers(1, step - 1))
    given_ = {"from": "0 V", "to": f"{step * count - by} V", "step": f"{step} V"}
    with pytest.raises(AxisProblemsError, match="change one of them"):
        read_axis("v", given_, None, settable=False)


def test_all_mistakes_of_a_range_are_told_at_once() -> None:
    with pytest.raises(AxisProblemsError) as told:
        read_axis("f", {"from": "3,5 GHz", "to": "4 Ghz", "points": 0}, None, settable=False)
    assert [path for path, _ in told.value.found] == [("from",), ("to",), ("points",)]


def test_one_that_lacks_its_unit_is_told_by_the_kind_of_the_other() -> None:
    with pytest.raises(AxisProblemsError) as told:
        read_axis("f", {"from": 2.2, "to": "2.4 GHz", "points": 3}, None, settable=False)
    assert told.value.found == ((("from",), "'2.2' has no unit: a frequency is written with one, like 2.9 GHz"),)


def test_an_axis_is_told_to_the_hash_without_being_written_out() -> None:
    axis = read_axis("f", {"from": "1 Hz", "to": "10 MHz", "points": 10_000_000}, None, settable=False)
    assert axis.document() == {"name": "f", "kind": "frequency", "from": 1.0, "to": 1e7, "points": 10_000_000}
    assert len(axis) == 10_000_000
