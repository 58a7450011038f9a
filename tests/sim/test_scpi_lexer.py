"""Program messages against IEEE 488.2 section 7 (from memory)."""

from __future__ import annotations

import math

import pytest
from benchrun_sim.scpi_errors import ScpiError
from benchrun_sim.scpi_framing import MessageSplitter
from benchrun_sim.scpi_lexer import Unit, units
from benchrun_sim.scpi_values import block, number, unit_scale
from hypothesis import given, settings
from hypothesis import strategies as st


def one(text: str) -> Unit:
    (unit,) = units(text)
    return unit


def error(text: str) -> int:
    with pytest.raises(ScpiError) as caught:
        list(units(text))
    return caught.value.number


def test_a_message_of_several_units() -> None:
    found = list(units(" :freq:CW 2.4 GHZ ; POW -10,MAX;*opc?;"))
    assert [(unit.header, unit.query) for unit in found] == [(":FREQ:CW", False), ("POW", False), ("*OPC", True)]
    assert found[0].tokens[0].value == 2.4
    assert found[0].tokens[0].suffix == "GHZ"
    assert [token.text for token in found[1].tokens] == ["-10", "MAX"]


def test_empty_messages_and_units_are_allowed() -> None:
    assert list(units("")) == []
    assert list(units(" \t\r")) == []


@given(st.floats(allow_nan=False, allow_infinity=False))
def test_any_number_reads_as_written(value: float) -> None:
    token = one(f"X {value!r}").tokens[0]
    assert token.kind == "number"
    assert token.value == value
    assert float(number(value)) == value


@pytest.mark.parametrize(
    ("text", "value"),
    [("1", 1), (".5", 0.5), ("5.", 5), ("-2.5E+3", -2500), ("1 e 3", 1000), ("#HfF", 255), ("#q17", 15), ("#B101", 5)],
)
def test_forms_of_numbers(text: str, value: float) -> None:  # IEEE 488.2 sections 7.7.2 and 7.7.4
    assert one(f"X {text}").tokens[0].value == value


@pytest.mark.parametrize(
    ("suffix", "base", "scale"),
    [  # IEEE 488.2 table 7-2; M is milli but MHZ and MOHM are mega
        ("HZ", "HZ", 1.0),
        ("KHZ", "HZ", 1e3),
        ("MHZ", "HZ", 1e6),
        ("MAHZ", "HZ", 1e6),
        ("GHZ", "HZ", 1e9),
        ("MV", "V", 1e-3),
        ("UV", "V", 1e-6),
        ("MAV", "V", 1e6),
        ("MA", "A", 1e-3),
        ("A", "A", 1.0),
        ("MS", "S", 1e-3),
        ("S", "S", 1.0),
        ("NS", "S", 1e-9),
        ("MOHM", "OHM", 1e6),
        ("DBM", "DBM", 1.0),
    ],
)
def test_suffixes(suffix: str, base: str, scale: float) -> None:
    assert unit_scale(suffix, base) == scale


@pytest.mark.parametrize(("suffix", "base"), [("V", "HZ"), ("XHZ", "HZ"), ("DB", "DBM"), ("HZ", "DBM"), ("MHZ", "V")])
def test_suffixes_of_another_unit(suffix: str, base: str) -> None:
    with pytest.raises(ScpiError) as caught:
        unit_scale(suffix, base)
    assert caught.value.number == -131


@given(st.text(st.characters(min_codepoint=1, max_codepoint=126, exclude_characters="\n")))
def test_strings_keep_their_content(content: str) -> None:
    for quote in "\"'":
        written = quote + content.replace(quote, quote * 2) + quote
        assert one(f"X {written}").tokens[0].text == content


@given(st.binary(max_size=300), st.integers(1, 4))
def test_blocks_keep_their_content(payload: bytes, digits: int) -> None:
    for written in (block(payload), b"#%d%0*d" % (digits, digits, len(payload)) + payload, b"#0" + payload):
        if digits < len(str(len(payload))) and written[1:2] == str(digits).encode() and written != block(payload):
            continue
        token = one((b"X " + written).decode("latin-1")).tokens[0]
        assert token.kind == "block"
        assert token.text.encode("latin-1") == payload


@pytest.mark.parametrize(
    ("text", "expected"),
    [  # IEEE 488.2 sections 7.7.6 and 8.7.9 to 8.7.10, from memory
        ("X #15HELLO", "HELLO"),
        ("X #3005HELLO", "HELLO"),
        ("X #0HELLO", "HELLO"),
    ],
)
def test_block_headers(text: str, expected: str) -> None:
    assert one(text).tokens[0].text == expected


def test_response_block_of_float64() -> None:
    """IEEE 488.2 section 8.7.9: #2, 16, and the numbers with the most significant byte first (from memory)."""
    import struct

    assert block(struct.pack(">2d", 1.0, -2.5)) == bytes.fromhex("23323136" + "3ff0000000000000" + "c004000000000000")


@pytest.mark.parametrize(
    ("value", "text"), [(math.inf, 9.9e37), (-math.inf, -9.9e37), (math.nan, 9.91e37)]
)  # SCPI-1999 volume 1 section 7.2.1, from memory
def test_special_numbers(value: float, text: float) -> None:
    assert float(number(value)) == text


@pytest.mark.parametrize(
    ("text", "expected"),
    [
        ("FREQ\xb5 1", -101),
        ("\xb5", -101),
        ("123", -102),
        ("FREQ:", -111),
        ("FREQ::CW", -111),
        ("FREQ?MAX", -111),
        ("FREQ,1", -111),
        ("FREQ 1 2", -103),
        ("FREQ 1,,2", -102),
        ("FREQ 1,", -102),
        ("FREQ ,1", -102),
        ("FREQ 1E40000", -123),
        ("FREQ " + "1" * 256, -124),
        ("FREQ 1 ABCDEFGHIJKLM", -131),
        ("FREQ ABCDEFGHIJKLM", -144),
        ("FREQ 'open", -151),
        ('FREQ "open', -151),
        ("FREQ #216abc", -161),
        ("FREQ #3ab", -161),
        ("FREQ #x", -161),
        ("FREQ (@1", -171),
    ],
)
def test_errors(text: str, expected: int) -> None:
    assert error(text) == expected


@given(st.text(st.characters(max_codepoint=255)))
@settings(max_examples=500)
def test_nothing_but_an_error_of_the_command_class_comes_out(text: str) -> None:
    assert -199 <= outcome(text) <= 0


def outcome(text: str) -> int:
    try:
        list(units(text))
    except ScpiError as caught:
        return caught.number
    return 0


MESSAGE = st.one_of(
    st.sampled_from([b"*IDN?", b"FREQ 1;POW 2", b"DISP 'a'", b"X #HFF", b"X #0", b"X #9", b'X "#15"', b"#", b""]),
    st.binary(max_size=40).map(lambda payload: b"X " + block(payload)),
)


@given(st.lists(MESSAGE, max_size=6), st.data())
@settings(max_examples=300)
def test_messages_do_not_depend_on_how_the_stream_is_cut(messages: list[bytes], data: st.DataObject) -> None:
    stream = b"".join(message + b"\n" for message in messages)
    whole = MessageSplitter().feed(stream, end=False)
    splitter, pieces, rest = MessageSplitter(), [], stream
    while rest:
        cut = data.draw(st.integers(1, len(rest)))
        pieces += splitter.feed(rest[:cut], end=False)
        rest = rest[cut:]
    assert pieces == whole
    assert len(splitter) == len(stream) - sum(len(message) + 1 for message in whole)


@given(st.binary(max_size=200))
def test_line_feeds_inside_a_block_are_data(payload: bytes) -> None:
    message = b"X " + block(payload)
    assert MessageSplitter().feed(message + b"\n*OPC?\n", end=False) == [message.decode("latin-1"), "*OPC?"]


def test_end_ends_a_message_without_line_feed() -> None:
    splitter = MessageSplitter()
    assert splitter.feed(b"*ID", end=False) == []
    assert splitter.feed(b"N?", end=True) == ["*IDN?"]
    assert splitter.feed(b"*IDN?\r\n", end=True) == ["*IDN?\r"]  # white space to the lexer, data at the end of a block
    assert len(splitter) == 0


def test_a_message_without_end_is_cut_off() -> None:
    splitter = MessageSplitter()
    for _ in range(16):
        splitter.feed(b"A" * (1 << 20), end=False)
    with pytest.raises(ScpiError) as caught:
        splitter.feed(b"A", end=False)
    assert caught.value.number == -363
    assert splitter.feed(b"*IDN?\n", end=False) == ["*IDN?"]
