"""Dialects: forms and placeholders, typed values that cannot carry a second command, replies, merging."""

from __future__ import annotations

import re
from typing import Any

import pytest
from hypothesis import example, given
from hypothesis import strategies as st
from pydantic import ValidationError

from benchrun.errors import InstrumentError, QuantityError, ReplyError
from benchrun.visa.carried import SUFFIXES, Carried
from benchrun.visa.dialect import (
    DialectText,
    Entry,
    EntryText,
    compile_dialect,
    compile_entry,
    merged,
    missing,
)


def entry(**fields: Any) -> Entry:
    return compile_entry("it", EntryText.model_validate(fields))


NASTY = (
    "1;*RST",
    "1\n*RST",
    "1:OUTP 1",
    "R3,R4",
    'R3"',
    "R3 R4",
    "R3;",
    " R3",
    "",
    "{x}",
    "Ｒ3",
    "R3\x00",
    "#15HELLO",
    "*RST",
    "MAX",
)
KINDS = sorted(set(SUFFIXES) | {"count", "number", "switch", "text"})


class TestText:
    def test_short_forms_units_and_suffixes(self) -> None:
        one = entry(set="SOURce{channel}:VOLTage {volts}", carries={"channel": "count", "volts": "voltage"})
        assert one.set_text({"channel": 2, "volts": -2.8}) == "SOUR2:VOLT -2.8 V"

    def test_the_suffix_as_sent(self) -> None:
        one = entry(set="FREQuency {f}", carries={"f": {"kind": "frequency", "unit": "MHZ"}})
        assert one.set_text({"f": 2.2e9}) == "FREQ 2200 MHZ"
        bare = entry(set="FREQuency {f}", carries={"f": {"kind": "frequency", "unit": ""}})
        assert bare.set_text({"f": 2.2e9}) == "FREQ 2200000000"

    def test_lists(self) -> None:
        one = entry(set="LIST:FREQuency {fs}", carries={"fs": {"kind": "frequency", "list": True}})
        assert one.set_text({"fs": (1e9, 2e9)}) == "LIST:FREQ 1000000000 HZ,2000000000 HZ"

    def test_words_in_any_form_go_out_in_short_form(self) -> None:
        one = entry(set="FREQuency:MODE {m}", carries={"m": {"kind": "text", "words": ["CW", "SWEep"]}})
        assert {one.set_text({"m": word}) for word in ("SWEep", "sweep", "SWE", "swe")} == {"FREQ:MODE SWE"}

    def test_fixed_parameters(self) -> None:
        assert entry(set="FORMat:DATA REAL,64").set_text({}) == "FORM:DATA REAL,64"

    def test_more_values_than_the_form_takes_do_no_harm(self) -> None:
        """A make without channels ignores the channel."""
        one = entry(set="VOLTage {volts}", carries={"channel": "count", "volts": "voltage"})
        assert one.set_text({"channel": 2, "volts": 1.0}) == "VOLT 1 V"

    @pytest.mark.parametrize(
        "values", [{}, {"volts": 1.0}, {"channel": 1.5, "volts": 1.0}, {"channel": "1", "volts": 1.0}]
    )
    def test_values_missing_or_not_of_their_kind(self, values: dict[str, Any]) -> None:
        one = entry(set="SOURce{channel}:VOLTage {volts}", carries={"channel": "count", "volts": "voltage"})
        with pytest.raises(QuantityError):
            one.set_text(values)

    def test_a_form_that_is_not_there(self) -> None:
        with pytest.raises(InstrumentError, match="no query form"):
            entry(set="ABORt").ask_text({})
        with pytest.raises(InstrumentError, match="no set form"):
            entry(ask="FREQuency?", reply="frequency").set_text({})


class TestNoSecondCommand:
    """Whatever a value is, what goes out is one unit of the form that was written in the dialect."""

    shape = re.compile(r"A:B [A-Za-z0-9.+-]+( [A-Z]+)?(,[A-Za-z0-9.+-]+( [A-Z]+)?)*")

    @given(
        st.sampled_from(KINDS),
        st.booleans(),
        st.one_of(st.text(), st.floats(), st.integers(), st.booleans(), st.none(), st.lists(st.text())),
    )
    @example("text", False, "1;*RST")
    @example("text", True, ["R3", "R4;*RST"])
    @example("level", False, "5 DBM;:OUTP 1")
    def test_any_value(self, kind: str, several: bool, value: Any) -> None:
        one = entry(set="A:B {v}", carries={"v": {"kind": kind, "list": several}})
        try:
            text = one.set_text({"v": value})
        except QuantityError:
            return
        assert self.shape.fullmatch(text), text

    @pytest.mark.parametrize("nasty", NASTY)
    def test_nasty_words(self, nasty: str) -> None:
        free = entry(set="A:B {v}", carries={"v": "text"})
        listed = entry(set="A:B {v}", carries={"v": {"kind": "text", "words": ["R3", "R4"]}})
        for one in (free, listed):
            if one is free and nasty == "MAX":
                continue
            with pytest.raises(QuantityError):
                one.set_text({"v": nasty})

    @given(st.text(max_size=30))
    @example("A;*RST")
    @example("A B;C")
    @example("A\nB")
    @example("A {v} ")
    @example("A\n")
    @example("A?;B")
    def test_any_form_is_one_command_or_refused(self, form: str) -> None:
        """Not even a dialect file can hide a second command in an entry."""
        try:
            text = EntryText.model_validate({"set": form})
        except ValidationError:
            return
        assert text.set is not None
        assert not set(text.set) & set(";\n\r\"'#")
        assert "?" not in text.set


class TestReplies:
    def test_kinds(self) -> None:
        assert entry(ask="A?", reply="frequency").read("2.2E9") == 2.2e9
        assert entry(ask="A?", reply={"kind": "frequency", "unit": "MHZ"}).read("2200") == 2.2e9
        assert entry(ask="A?", reply="switch").read("1") is True
        assert entry(ask="A?", reply="text").read('"so"') == "so"
        assert entry(ask="A?", reply={"kind": "text", "words": ["COHerent", "STEPped"]}).read("coh") == "COHerent"
        assert entry(ask="A?", reply={"kind": "switch", "list": True}).read("0,1") == (False, True)

    @pytest.mark.parametrize("text", ["9.91E37", "9.9E37", "-9.9E37", "", "1,2", "abc"])
    def test_what_is_no_number(self, text: str) -> None:
        with pytest.raises(ReplyError):
            entry(ask="A?", reply="level").read(text)

    def test_the_reply_is_what_the_set_form_carries(self) -> None:
        assert entry(set="A {v}", ask="A?", carries={"v": "switch"}).read("1") is True

    @pytest.mark.parametrize(
        ("sent", "stands", "agrees"),
        [(1e9, 1e9 + 0.9, True), (1e9, 1e9 + 1.1, False), (0.0, 0.0, True), (1e9, 1e9 * (1 + 1e-13), True)],
    )
    def test_agreement_within_the_tolerance(self, sent: float, stands: float, agrees: bool) -> None:
        one = entry(set="A {v}", ask="A?", carries={"v": "frequency"}, tolerance="1 Hz")
        assert one.agrees(sent, stands) is agrees

    def test_agreement_of_words_and_lists(self) -> None:
        one = entry(set="A {v}", ask="A?", carries={"v": {"kind": "text", "words": ["SWEep", "LIST"]}})
        assert one.agrees("SWE", "SWEep")
        assert not one.agrees("SWE", "LIST")
        several = entry(set="A {v}", ask="A?", carries={"v": {"kind": "frequency", "list": True}}, tolerance="1 Hz")
        assert several.agrees((1.0, 2.0), (1.0, 2.5))
        assert not several.agrees((1.0, 2.0), (1.0,))


class TestFiles:
    @pytest.mark.parametrize(
        ("fields", "reason"),
        [
            ({"set": "A {v}"}, "nothing says what {v} carries"),
            ({"set": "A{v} 1", "carries": {"v": "level"}}, "part of a header"),
            ({"ask": "A?"}, "nothing says what the reply is"),
            ({"set": "A {v}", "carries": {"v": {"kind": "level", "unit": "V"}}}, "does not fit kind level"),
            ({"set": "A {v}", "carries": {"v": {"kind": "level", "words": ["A"]}}}, "words are for kind text"),
            ({"set": "A {v}", "carries": {"v": "loudness"}}, "kind"),
            ({"set": "A?"}, "not one command"),
            ({"ask": "A"}, "not one command"),
            ({"sett": "A"}, "sett"),
        ],
    )
    def test_mistakes(self, fields: dict[str, Any], reason: str) -> None:
        with pytest.raises((ValidationError, ValueError), match=reason):
            entry(**fields)

    def test_a_bad_tolerance_names_the_entry(self) -> None:
        text = DialectText.model_validate({
            "benchrun": 1,
            "entries": {"far": {"set": "A {v}", "ask": "A?", "carries": {"v": "level"}, "tolerance": "1 parsec"}},
        })  # fmt: skip
        dialect, wrong = compile_dialect(text)
        assert not dialect.has("far")
        assert "1 parsec" in wrong["far"]

    def test_a_file_extends_field_by_field(self) -> None:
        base = DialectText.model_validate({
            "benchrun": 1,
            "entries": {
                "voltage": {
                    "set": "SOURce{channel}:VOLTage {volts}", "ask": "SOURce{channel}:VOLTage?",
                    "carries": {"channel": "count", "volts": "voltage"}, "tolerance": "1 mV",
                },
                "waves": {"carries": {"receivers": {"kind": "text", "list": True}}},
                "lock": {"set": "SYSTem:KLOCk {on}", "carries": {"on": "switch"}},
            },
        })  # fmt: skip
        over = DialectText.model_validate({
            "benchrun": 1, "options": True, "timing": {"point": "3 ms"},
            "entries": {
                "voltage": {
                    "set": "INSTrument{channel}:VOLTage {volts}",
                    "carries": {"volts": {"kind": "voltage", "unit": "MV"}},
                },
                "waves": {"set": "SENSe:RECeiver:LIST {receivers}", "ask": "SENSe:RECeiver:LIST?"},
                "lock": {"set": None},
            },
        })  # fmt: skip
        plain, one = compile_dialect(base)[0], compile_dialect(merged(base, over))[0]
        assert missing(plain, ("voltage", "waves", "lock", "nothing")) == ("waves", "nothing")
        assert missing(one, ("voltage", "waves", "lock")) == ("lock",)
        assert one["voltage"].set_text({"channel": 1, "volts": 1.5}) == "INST1:VOLT 1500 MV"
        assert one["voltage"].ask_text({"channel": 1}) == "SOUR1:VOLT?"
        assert one["voltage"].tolerance == 1e-3
        assert one["waves"].set_text({"receivers": ("R3", "R4")}) == "SENS:REC:LIST R3,R4"
        assert (one.options, one.point_s) == (True, 3e-3)

    def test_the_schema_is_for_editors(self) -> None:
        schema = DialectText.model_json_schema()
        assert schema["properties"]["entries"]
        assert schema["additionalProperties"] is False


@given(st.floats(-1e12, 1e12), st.sampled_from(sorted(SUFFIXES)), st.data())
def test_a_number_sent_with_a_suffix_means_the_same(value: float, kind: str, data: st.DataObject) -> None:
    unit = data.draw(st.sampled_from(sorted(SUFFIXES[kind])))
    carried = Carried(kind=kind, unit=unit)  # type: ignore[arg-type]
    number, suffix = carried.write(value).split(" ")
    assert suffix == unit
    assert carried.read(number) == pytest.approx(value, rel=1e-14, abs=1e-300)
