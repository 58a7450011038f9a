"""Values of sweeps."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from benchrun.contract.kinds import Kind
from benchrun.quantities import show
from benchrun.recipe.axis import Axis, Evenly, Wrong, read_axis

HZ = st.integers(1, 10**11).map(float)


def right(name: str, given: Any, kind: Kind | None = None) -> Axis:
    axis, found = read_axis(name, given, kind, settable=kind is not None)
    assert found == []
    assert axis is not None
    return axis


def wrong(given: Any) -> list[Wrong]:
    axis, found = read_axis("x", given, None, settable=False)
    assert axis is None
    return found


def test_lists_and_ranges() -> None:
    assert list(right("f", ["2 GHz", "2.4 GHz", "2.1 GHz"]).values) == [2e9, 2.4e9, 2.1e9]
    axis = right("drive", {"from": "14 dBm", "to": "30 dBm", "step": "1 dB"}, "level")
    assert list(axis.values) == [float(level) for level in range(14, 31)]
    down = right("v", {"from": "28 V", "to": "27.7 V", "step": "0.1 V"})
    assert list(down.values) == pytest.approx([28.0, 27.9, 27.8, 27.7], abs=1e-12)
    assert down.values[-1] == 27.7
    assert list(right("n", [1, 2.5]).values) == [1.0, 2.5]
    assert right("t", ["20 degC", "30 degC"]).kind == "temperature"


def test_words() -> None:
    axis = right("standard", ["open", "offset-short-1"])
    assert (axis.kind, tuple(axis.values)) == ("text", ("open", "offset-short-1"))


def test_the_demo_grid_is_numpys() -> None:
    grid = right("frequency", {"from": "2.2 GHz", "to": "2.4 GHz", "points": 81})
    assert np.array_equal(np.array(list(grid.values)), np.linspace(2.2e9, 2.4e9, 81))


@given(start=HZ, stop=HZ, count=st.integers(2, 2000))
def test_ranges_reach_both_ends_evenly(start: float, stop: float, count: int) -> None:
    given_ = {"from": show(start, "frequency"), "to": show(stop, "frequency"), "points": count}
    values = right("f", given_).values
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
    values = right("drive", given_, "level").values
    assert len(values) == count
    assert values[-1] == stop / 10


@given(step=st.integers(2, 40), count=st.integers(2, 100), short=st.data())
def test_steps_that_do_not_end_there_are_told(step: int, count: int, short: st.DataObject) -> None:
    by = short.draw(st.integers(1, step - 1))
    given_ = {"from": "0 V", "to": f"{step * count - by} V", "step": f"{step} V"}
    ((path, message),) = wrong(given_)
    assert path == ("step",)
    assert message.endswith("change one of them")


def test_all_mistakes_of_a_range_are_told_at_once() -> None:
    assert [path for path, _ in wrong({"from": "3,5 GHz", "to": "4 Ghz", "points": 0})] == [
        ("from",),
        ("to",),
        ("points",),
    ]


def test_one_that_lacks_its_unit_is_told_by_the_kind_of_the_other() -> None:
    assert wrong({"from": 2.2, "to": "2.4 GHz", "points": 3}) == [
        (("from",), "'2.2' has no unit: a frequency is written with one, like 2.9 GHz")
    ]


def test_an_axis_is_told_to_the_hash_without_being_written_out() -> None:
    axis = right("f", {"from": "1 Hz", "to": "10 MHz", "points": 10_000_000})
    assert axis.document() == {"name": "f", "kind": "frequency", "from": 1.0, "to": 1e7, "points": 10_000_000}
    assert len(axis) == 10_000_000
