"""SCPI text and blocks against IEEE 488.2 and SCPI-1999, and as properties."""

from __future__ import annotations

import contextlib
import math
import struct

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from benchrun.errors import QuantityError, ReplyError
from benchrun.visa import scpi

finite = st.floats(allow_nan=False, allow_infinity=False)


class TestStandards:
    """Values from outside the project; the source stands beside each."""

    def test_definite_block_of_float64(self) -> None:
        """IEEE 488.2 section 8.7.9, from memory: #, digits of the length, the length, then the bytes."""
        block = scpi.make_floats(np.array([1.0, -2.5]))
        assert block == b"#216" + bytes.fromhex("3ff0000000000000c004000000000000")
        assert list(scpi.parse_floats(scpi.parse_block(block), 2)) == [1.0, -2.5]

    @pytest.mark.parametrize(
        ("message", "payload"), [(b"#0..\n", b".."), (b"#15HELLO", b"HELLO"), (b"#3005HELLO", b"HELLO")]
    )
    def test_blocks(self, message: bytes, payload: bytes) -> None:
        """IEEE 488.2 sections 7.7.6 and 8.7.9/8.7.10, from memory."""
        assert scpi.parse_block(message) == payload

    def test_short_block_is_an_error(self) -> None:
        """IEEE 488.2, from memory: the length is a promise."""
        with pytest.raises(ReplyError, match="says 16 bytes, 3 arrived"):
            scpi.parse_block(b"#216abc")

    @pytest.mark.parametrize(
        ("header", "short"),
        [("FREQuency", "FREQ"), ("POWer", "POW"), ("OUTPut", "OUTP"), ("SWEep", "SWE"), ("BANDwidth", "BAND")],
    )
    def test_short_forms(self, header: str, short: str) -> None:
        """SCPI-1999 volume 1 section 6.2.1, from memory: four letters, three where the fourth is a vowel."""
        assert scpi.short_form(header) == short
        assert scpi.is_form_of(short.lower(), header)
        assert scpi.is_form_of(header.upper(), header)
        assert not scpi.is_form_of(header[:-1], header)

    def test_special_numbers(self) -> None:
        """SCPI-1999 volume 1 section 7.2.1, from memory: 9.9E37 infinity, -9.9E37 its negative, 9.91E37 no number."""
        assert scpi.parse_number("9.9E37") == math.inf
        assert scpi.parse_number("-9.9E37") == -math.inf
        assert math.isnan(scpi.parse_number("9.91E37"))

    @pytest.mark.parametrize(
        ("text", "value"), [("+12", 12.0), ("-0.5", -0.5), (".5", 0.5), ("1.", 1.0), ("+1.5E-003", 1.5e-3)]
    )
    def test_numeric_responses(self, text: str, value: float) -> None:
        """NR1, NR2, NR3: IEEE 488.2 sections 8.7.2 to 8.7.4, from memory."""
        assert scpi.parse_number(text) == value

    def test_string_response(self) -> None:
        """IEEE 488.2 section 8.7.8, from memory: inner quotes are doubled."""
        assert scpi.parse_text('"say ""on"""') == 'say "on"'

    def test_error_queue(self) -> None:
        """SCPI-1999 volume 2 chapter 21, from memory: number, then text in quotes; 0,"No error" when empty."""
        assert scpi.parse_error('-113,"Undefined header;SOUR:FRQ"') == scpi.ErrorEntry(
            -113, "Undefined header;SOUR:FRQ"
        )
        assert scpi.parse_error(scpi.NO_ERROR).number == 0


@pytest.mark.parametrize("text", ["", "1,2", "nan", "inf", "1e", "0x10", "1_000", "١", "1 2", "--1", "1.2.3"])
def test_not_a_number(text: str) -> None:
    with pytest.raises(ReplyError):
        scpi.parse_number(text)


@pytest.mark.parametrize("message", [b"", b"#", b"#x", b"16", b"#2ab", b"#0ab", b"#15HELLOx", b"#14HELLO"])
def test_not_a_block(message: bytes) -> None:
    with pytest.raises(ReplyError):
        scpi.parse_block(message)


@pytest.mark.parametrize("text", ["", "0", "0,", "0,No error", '"No error"', "x,y", '0,"No error', "99999999999,1"])
def test_not_an_error_entry(text: str) -> None:
    with pytest.raises(ReplyError):
        scpi.parse_error(text)


@pytest.mark.parametrize("bad", [math.nan, math.inf, 9.9e37, 9.91e37, -math.inf])
def test_no_value_among_the_data(bad: float) -> None:
    payload = struct.pack(">3d", 1.0, bad, 2.0)
    with pytest.raises(ReplyError, match="number 2 of 3"):
        scpi.parse_floats(payload, 3)


@pytest.mark.parametrize("value", [math.nan, math.inf, -math.inf])
def test_only_finite_numbers_are_sent(value: float) -> None:
    with pytest.raises(QuantityError):
        scpi.number(value, "DBM")


@given(finite.filter(lambda value: abs(value) < scpi.INFINITY))
def test_a_number_reads_back_exactly(value: float) -> None:
    assert scpi.parse_number(scpi.number(value)) == value


@given(st.text())
def test_a_string_reads_back_exactly(text: str) -> None:
    assert scpi.parse_text(scpi.quoted(text)) == text


@given(st.integers(-32768, 32767), st.text())
def test_an_error_entry_reads_back_exactly(number: int, text: str) -> None:
    entry = scpi.ErrorEntry(number, text)
    assert scpi.parse_error(str(entry)) == entry


@given(st.lists(st.text().map(scpi.quoted), min_size=1))
def test_separators_inside_quotes_do_not_split(parts: list[str]) -> None:
    assert scpi.split(";".join(parts), ";") == parts


@given(st.binary())
def test_a_block_reads_back_exactly(payload: bytes) -> None:
    block = scpi.make_block(payload)
    assert scpi.parse_block(block) == payload
    assert scpi.parse_block(block + b"\n") == payload


@given(st.binary(min_size=1), st.data())
def test_any_shortened_block_is_refused(payload: bytes, data: st.DataObject) -> None:
    block = scpi.make_block(payload)
    cut = data.draw(st.integers(0, len(block) - 1))
    with pytest.raises(ReplyError):
        scpi.parse_block(block[:cut])


@given(st.text())
def test_any_text_is_read_or_refused(text: str) -> None:
    """No reply, however odd, ends in anything but a value or a ReplyError."""
    for read in (
        scpi.parse_number,
        scpi.parse_switch,
        scpi.parse_text,
        scpi.parse_error,
        scpi.parse_list,
        lambda t: scpi.split(t, ";"),
    ):
        with contextlib.suppress(ReplyError):
            read(text)  # type: ignore[operator]


@given(st.binary(max_size=40))
def test_any_bytes_are_a_block_or_refused(message: bytes) -> None:
    payload = b""
    with contextlib.suppress(ReplyError):
        payload = scpi.parse_block(message)
    assert payload in message


@given(st.text())
def test_a_word_is_one_word(text: str) -> None:
    try:
        scpi.word(text)
    except QuantityError:
        return
    assert text.isascii()
    assert text.isalnum()
    assert text[0].isalpha()
