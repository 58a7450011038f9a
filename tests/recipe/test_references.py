"""Sums of references and quantities: all that is ever evaluated."""

from __future__ import annotations

import math
from contextlib import suppress

import pytest
from hypothesis import given
from hypothesis import strategies as st

from benchrun.errors import InputError, QuantityError
from benchrun.quantities import show
from benchrun.recipe.references import parse_sum, references_in, substitute

NAMES = st.from_regex(r"[a-z][a-z0-9-]{0,6}(\.[a-z][a-z-]{0,6})?", fullmatch=True)
HZ = st.floats(-1e11, 1e11, allow_subnormal=False)


@pytest.mark.parametrize(
    ("text", "kind", "value"),
    [
        ("2.3 GHz", "frequency", 2.3e9),
        ("{frequency}", "frequency", 2.2e9),
        ("{frequency} - 7 MHz", "frequency", 2.193e9),
        ("{frequency} - 7 MHz + 1 kHz", "frequency", 2.193001e9),
        ("-7 MHz", "frequency", -7e6),
        ("-7 MHz + {frequency}", "frequency", 2.193e9),
        ("1e-3 GHz", "frequency", 1e6),
        ("{frequency} - {frequency}", "frequency", 0.0),
        ("{pump.level} - 3 dB", "level", -13.0),
        ("8 dBm - 3 dB + 0.5 dB", "level", 5.5),
        ("25 degC + 1.5 K", "temperature", 26.5),
    ],
)
def test_a_sum_is_worked_out(text: str, kind: str, value: float) -> None:
    values = {"frequency": 2.2e9, "pump.level": -10.0}
    assert parse_sum(text).evaluate(values, kind) == pytest.approx(value, rel=1e-15, abs=1e-9)


@pytest.mark.parametrize(
    "text",
    ["{frequency", "frequency}", "{}", "{a b}", "{frequency}*2", "{frequency} 7 MHz", " + 7 MHz", "7 MHz - ", "{f} + "],
)
def test_what_is_no_sum_is_told(text: str) -> None:
    with pytest.raises(QuantityError) as told:
        parse_sum(text).evaluate({"f": 1.0, "frequency": 1.0}, "frequency")
    assert str(told.value)


@pytest.mark.parametrize(
    ("text", "kind", "message"),
    [
        ("8 dBm + 3 dBm", "level", "'3 dBm' is a level, where a ratio is expected, like 20 dB"),
        ("{f} - 7 dB", "frequency", "'7 dB' is a ratio, where a frequency is expected, like 2.9 GHz"),
        ("{f} - 7", "frequency", "'7' has no unit: a frequency is written with one, like 2.9 GHz"),
        ("__import__('os')", "frequency", "'__import__('os')' is not a quantity; a frequency is written like 2.9 GHz"),
    ],
)
def test_terms_of_another_kind_are_told(text: str, kind: str, message: str) -> None:
    with pytest.raises(QuantityError) as told:
        parse_sum(text).evaluate({"f": 1.0}, kind)
    assert str(told.value) == message


def test_a_reference_without_a_value_is_told() -> None:
    with pytest.raises(InputError) as told:
        parse_sum("{frequency} - 7 MHz").evaluate({"drive": 1.0, "bias": 2.0}, "frequency")
    assert str(told.value) == "'{frequency}' has no value here. What has one: bias, drive."


def test_which_references_fit_where() -> None:
    assert parse_sum("{f} - 7 MHz").fits("f", "frequency", "frequency")
    assert not parse_sum("{f} - 7 MHz").fits("f", "level", "frequency")
    assert parse_sum("8 dBm - {r}").fits("r", "ratio", "level")
    assert not parse_sum("8 dBm - {r}").fits("r", "level", "level")
    assert not parse_sum("{r} - {r}").fits("r", "level", "level")


@given(terms=st.lists(st.tuples(st.booleans(), NAMES | HZ), min_size=1, max_size=6), data=st.data())
def test_any_sum_is_the_sum_of_its_terms(terms: list[tuple[bool, str | float]], data: st.DataObject) -> None:
    names = {term for _, term in terms if isinstance(term, str)}
    values = {name: data.draw(HZ) for name in sorted(names)}
    text, total = "", 0.0
    for position, (plus, term) in enumerate(terms):
        written = f"{{{term}}}" if isinstance(term, str) else show(term, "frequency")
        text += written if position == 0 else f" {'+' if plus else '-'} {written}"
        value = values[term] if isinstance(term, str) else term
        total += value if plus or position == 0 else -value
    found = parse_sum(text)
    assert set(found.references) == names
    assert math.isclose(found.evaluate(values, "frequency"), total, rel_tol=1e-12, abs_tol=1e-3)


@given(st.text(max_size=40) | st.text("{}ab+- 1GHz.", max_size=30))
def test_any_text_is_a_number_or_told(text: str) -> None:
    with suppress(InputError):
        total = parse_sum(text)
        assert math.isfinite(total.evaluate(dict.fromkeys(total.references, 1.0), "frequency"))


def test_words_are_put_in_place_of_references() -> None:
    assert references_in("Connect {standard} to {pump.level}, {not a name}") == ("standard", "pump.level")
    assert substitute("Connect {standard}.", {"standard": "open"}) == "Connect open."
    with pytest.raises(InputError) as told:
        substitute("{standrad}", {"standard": "open"})
    assert str(told.value) == "'{standrad}' stands for no word here. What does: standard."
