"""Quantities as people write them, and what they are told when they err."""

from __future__ import annotations

import math
from contextlib import suppress

import pytest
from hypothesis import given
from hypothesis import strategies as st

from benchrun.errors import QuantityError
from benchrun.quantities import UNITS, example, kind_of, parse, parse_coefficient

WITH_UNITS = sorted(UNITS)
KINDS = [*WITH_UNITS, "number", "count", "switch"]


@pytest.mark.parametrize(
    ("text", "kind", "value"),
    [
        ("2.9 GHz", "frequency", 2.9e9),
        ("2.9GHz", "frequency", 2.9e9),
        ("-7 MHz", "frequency", -7e6),
        ("+1.5e3 kHz", "frequency", 1.5e6),
        ("-10 dBm", "level", -10.0),
        ("20 dB", "ratio", 20.0),
        ("350 mA", "current", 0.35),
        ("20 ms", "time", 0.02),
        ("7 days", "time", 604800.0),
        ("1 day", "time", 86400.0),
        ("10 min", "time", 600.0),
        ("30 ps", "time", 30e-12),
        ("25 degC", "temperature", 25.0),
        ("1.5 K", "temperature-difference", 1.5),
        ("180 deg", "angle", math.pi),
        ("-0.5 rad", "angle", -0.5),
        ("4.7 kohm", "resistance", 4700.0),
        ("50 fF", "capacitance", 50e-15),
        ("2 fF/GHz", "capacitance", 2e-24),
        ("3 F/Hz^2", "capacitance", 3.0),
        ("4 fF/GHz^3", "capacitance", 4e-42),
        ("5 pH", "inductance", 5e-12),
        ("1 pH/GHz", "inductance", 1e-21),
        ("2 Gohm/s", "offset-loss", 2e9),
        ("20 m", "length", 20.0),
        ("0.6", "number", 0.6),
        (0.6, "number", 0.6),
        (81, "count", 81.0),
        ("81", "count", 81.0),
        ("on", "switch", 1.0),
        (False, "switch", 0.0),
    ],
)
def test_reads_what_is_written_as_it_should_be(text: str | float, kind: str, value: float) -> None:
    assert parse(text, kind) == pytest.approx(value, rel=1e-15)


@pytest.mark.parametrize("kind", KINDS)
def test_reads_its_own_example(kind: str) -> None:
    assert math.isfinite(parse(example(kind), kind))


@pytest.mark.parametrize(
    ("text", "kind", "message"),
    [
        ("3,5 GHz", "frequency", "'3,5 GHz' is not a quantity: the decimal mark is a point. Did you mean 3.5 GHz?"),
        ("10 min", "level", "'10 min' is a time, where a level is expected, like -10 dBm"),
        ("2.9 Ghz", "frequency", "'2.9 Ghz': the unit is written GHz. Did you mean 2.9 GHz?"),
        ("1e999 Hz", "frequency", "'1e999 Hz' is beyond any number that can be carried; check the exponent"),
        ("1e-999 Hz", "frequency", "'1e-999 Hz' is beyond any number that can be carried; check the exponent"),
        ("1e99999999 Hz", "frequency", "'1e99999999 Hz' is beyond any number that can be carried; check the exponent"),
        ("2.9", "frequency", "'2.9' has no unit: a frequency is written with one, like 2.9 GHz"),
        (-10, "level", "'-10' has no unit: a level is written with one, like -10 dBm"),
        ("10 MOHM", "resistance", "'10 MOHM': the unit MOHM could be mohm or Mohm. Write which"),
        (
            "1,000 MHz",
            "frequency",
            "'1,000 MHz' could be 1.000 MHz or 1000 MHz: the decimal mark is a point, and there are no thousands "
            "marks. Write which",
        ),
        (
            "1,234.5 MHz",
            "frequency",
            "'1,234.5 MHz' is not a quantity: numbers are written without thousands marks. Did you mean 1234.5 MHz?",
        ),
        (
            "1 000 MHz",
            "frequency",
            "'1 000 MHz' is not a quantity: numbers are written without thousands marks. Did you mean 1000 MHz?",
        ),
        (
            "\u221210 dBm",
            "level",
            "'\u221210 dBm' is not a quantity: the minus sign is a hyphen. Did you mean -10 dBm?",
        ),
        (
            ".5 V",
            "voltage",
            "'.5 V' is not a quantity: digits stand on both sides of a decimal point. Did you mean 0.5 V?",
        ),
        (
            "5. V",
            "voltage",
            "'5. V' is not a quantity: digits stand on both sides of a decimal point. Did you mean 5 V?",
        ),
        ("nan dBm", "level", "'nan dBm' is not a finite number"),
        ("-inf dBm", "level", "'-inf dBm' is not a finite number"),
        ("1 h 20 min", "time", "'1 h 20 min' is not a quantity: one number and one unit are expected, like 20 ms"),
        ("10 \u00b5s", "time", "'10 \u00b5s': the unit is written us. Did you mean 10 us?"),
        ("50 \u03a9", "resistance", "'50 \u03a9': the unit is written ohm. Did you mean 50 ohm?"),
        ("300 K", "temperature", "'300 K' is a temperature difference, where a temperature is expected, like 25 degC"),
        ("3 dB", "level", "'3 dB' is a ratio, where a level is expected, like -10 dBm"),
        (
            "5 furlong",
            "frequency",
            "'5 furlong': there is no unit furlong. A frequency is written in Hz, kHz, MHz, GHz or THz",
        ),
        ("", "level", "'' is not a quantity; a level is written like -10 dBm"),
        ("GHz", "frequency", "'GHz' is not a quantity; a frequency is written like 2.9 GHz"),
        (True, "number", "a number is expected here, like 0.6, not 'True'"),
        (None, "level", "a level is missing here; it is written like -10 dBm"),
        ([1], "level", "a level is expected here, like -10 dBm, not a list"),
        (
            {"drive": None},
            "level",
            'a level is expected here, not a mapping; a reference is written in quotes: "{drive}"',
        ),
        ("2.4 GHz", "number", "'2.4 GHz': a number is written without a unit, like 0.6"),
        ("81 V", "count", "'81 V': a count is written without a unit, like 81"),
        (1.5, "count", "'1.5' is not a count: a whole number, 0 or more, is expected"),
        (-1, "count", "'-1' is not a count: a whole number, 0 or more, is expected"),
        (math.inf, "number", "'inf' is not a finite number"),
        ("yes", "switch", "'yes' is neither on nor off"),
        ("\u0663 V", "voltage", "'\u0663 V' is not a quantity; a voltage is written like 28 V"),
    ],
)
def test_says_what_is_wrong_and_what_was_meant(text: str | float, kind: str, message: str) -> None:
    with pytest.raises(QuantityError) as told:
        parse(text, kind)
    assert str(told.value) == message


@given(text=st.text(max_size=30), kind=st.sampled_from(KINDS))
def test_any_text_is_a_finite_number_or_told(text: str, kind: str) -> None:
    with suppress(QuantityError):
        assert math.isfinite(parse(text, kind))


@given(
    number=st.from_regex(r"[+-]?[0-9]{0,6}[.,' ]?[0-9]{0,6}([eE][+-]?[0-9]{1,5})?", fullmatch=True),
    unit=st.sampled_from([unit for units in UNITS.values() for unit in units] + ["", "Ghz", "mhz", "dbm", "m V"]),
    kind=st.sampled_from(KINDS),
)
def test_near_misses_are_numbers_or_told(number: str, unit: str, kind: str) -> None:
    with suppress(QuantityError):
        assert math.isfinite(parse(f"{number} {unit}", kind))
        assert "," not in number
        assert "'" not in number


@given(number=st.integers(-(10**6), 10**6), kind=st.sampled_from(WITH_UNITS))
def test_a_unit_of_another_kind_is_never_taken(number: int, kind: str) -> None:
    for other, units in UNITS.items():
        if other != kind:
            for unit in units:
                with pytest.raises(QuantityError):
                    parse(f"{number} {unit}", kind)


def test_every_unit_belongs_to_one_kind() -> None:
    every = [unit for units in UNITS.values() for unit in units]
    assert len(every) == len(set(every))


@pytest.mark.parametrize("kind", WITH_UNITS)
def test_the_kind_is_found_from_any_of_its_units(kind: str) -> None:
    assert {kind_of(f"1.5 {unit}") for unit in UNITS[kind]} == {kind}


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("3,5 GHz", "'3,5 GHz' is not a quantity: the decimal mark is a point. Did you mean 3.5 GHz?"),
        ("3 GHZ", "'3 GHZ': there is no unit GHZ. Did you mean 3 GHz?"),
        ("3 MOHM", "'3 MOHM': there is no unit MOHM. It could be mohm or Mohm. Write which"),
        (None, "a quantity is missing here; it is written like 2.9 GHz"),
    ],
)
def test_a_kind_that_cannot_be_found_is_told(text: str, message: str) -> None:
    with pytest.raises(QuantityError) as told:
        kind_of(text)
    assert str(told.value) == message


def test_coefficients_are_in_the_unit_of_their_place() -> None:
    assert parse_coefficient("0.1 fF/GHz^2", "capacitance", 2) == pytest.approx(1e-34, rel=1e-15)
    assert parse_coefficient("2536.8e-27 F/Hz", "capacitance", 1) == 2536.8e-27
    with pytest.raises(QuantityError) as told:
        parse_coefficient("0 fF", "capacitance", 1)
    assert str(told.value) == "'0 fF' is the second coefficient here, written in fF/GHz or another unit per Hz^1"
