"""What is shown is read again as the same number; the short form is for people."""

from __future__ import annotations

import math
import re

import pytest
from hypothesis import example, given
from hypothesis import strategies as st

from benchrun.contract.kinds import UNIT_SUFFIX
from benchrun.quantities import UNITS, column, parse, pattern, show

FINITE = st.floats(allow_nan=False, allow_infinity=False, allow_subnormal=False)


@given(value=FINITE, kind=st.sampled_from([*sorted(UNITS), "number"]))
@example(value=0.1 + 0.2, kind="voltage")
@example(value=math.radians(-0.39), kind="angle")
@example(value=5e-324, kind="level")
@example(value=-0.0, kind="frequency")
def test_what_is_shown_is_read_again(value: float, kind: str) -> None:
    again = parse(show(value, kind), kind)
    assert again == value
    assert math.copysign(1.0, again) == math.copysign(1.0, value)


@given(value=st.integers(0, 2**53))
def test_counts_are_read_again(value: int) -> None:
    assert parse(show(value, "count"), "count") == value


@given(number=st.decimals(-1000, 1000, places=3), kind=st.sampled_from(sorted(UNITS)), data=st.data())
def test_what_people_write_is_shown_no_longer_than_they_wrote_it(
    number: object, kind: str, data: st.DataObject
) -> None:
    unit = data.draw(st.sampled_from(sorted(UNITS[kind])))
    value = parse(f"{number} {unit}", kind)
    assert parse(show(value, kind), kind) == value


@pytest.mark.parametrize(
    ("value", "kind", "text"),
    [
        (2.9e9, "frequency", "2.9 GHz"),
        (7e6, "frequency", "7 MHz"),
        (0.0, "frequency", "0 Hz"),
        (-10.0, "level", "-10 dBm"),
        (parse("-0.39 deg", "angle"), "angle", "-0.39 deg"),
        (604800.0, "time", "7 days"),
        (1200.0, "time", "20 min"),
        (0.02, "time", "20 ms"),
        (3e-11, "time", "30 ps"),
        (0.35, "current", "350 mA"),
        (5e-14, "capacitance", "50 fF"),
        (50.0, "resistance", "50 ohm"),
        (1.0, "switch", "on"),
        (81.0, "count", "81"),
    ],
)
def test_shows_in_the_unit_that_people_use(value: float, kind: str, text: str) -> None:
    assert show(value, kind) == text


@pytest.mark.parametrize(
    ("value", "kind", "digits", "text"),
    [
        (2.3456789e9, "frequency", 3, "2.35 GHz"),
        (999.96e6, "frequency", 3, "1 GHz"),
        (0.351987, "current", 3, "352 mA"),
        (30.649, "level", 1, "30.6 dBm"),
        (0.0, "voltage", 3, "0 V"),
    ],
)
def test_short_form(value: float, kind: str, digits: int, text: str) -> None:
    assert show(value, kind, digits) == text


@given(value=FINITE, kind=st.sampled_from(sorted(UNITS)))
def test_an_editor_takes_what_is_shown(value: float, kind: str) -> None:
    assert re.search(pattern(kind), show(value, kind))


def test_columns_carry_the_unit() -> None:
    assert column("pump.level", "level") == "pump.level_dbm"
    assert {column("x", kind) for kind in UNIT_SUFFIX} == {f"x_{suffix}" for suffix in UNIT_SUFFIX.values()}
    assert column("standard", "text") == "standard"
