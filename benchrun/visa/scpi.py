"""SCPI text and IEEE 488.2 blocks: written and read here, without any I/O.

Sources: IEEE Std 488.2-1992 (program data section 7.7, response data section 8.7) and SCPI-1999 (volume 1: headers
section 6.2.1, numbers section 7.2; volume 2: SYSTem:ERRor chapter 21), both cited from memory.
"""

from __future__ import annotations

import math
import re
from dataclasses import dataclass

import numpy as np

from benchrun.contract.capture import FloatArray
from benchrun.errors import QuantityError, ReplyError

#: Numbers that stand for something else (SCPI-1999 volume 1, section 7.2.1).
INFINITY = 9.9e37
NOT_A_NUMBER = 9.91e37

_LOWER = re.compile(r"[a-z]")
_NUMBER = re.compile(r"[+-]?(\d+\.?\d*|\.\d+)([eE][+-]?\d+)?")
_WORD = re.compile(r"[A-Za-z][A-Za-z0-9]*")
_DIGITS = re.compile(rb"\d+")
_SWITCH = {"1": True, "ON": True, "0": False, "OFF": False}


def short_form(header: str) -> str:
    """Return the short form of a header written with its capitals: "SOURce:FREQuency:CW" -> "SOUR:FREQ:CW"."""
    return _LOWER.sub("", header)


def long_form(header: str) -> str:
    """Return the long form: "SOURce:FREQuency:CW" -> "SOURCE:FREQUENCY:CW"."""
    return header.upper()


def is_form_of(word: str, header: str) -> bool:
    """Whether `word` is the long or the short form of a header written with its capitals, in any case."""
    return word.upper() in (short_form(header), long_form(header))


def number(value: float, suffix: str = "") -> str:
    """Write a number so that it reads back exactly, with its suffix: (2.2e9, "HZ") -> "2200000000 HZ".

    Raises QuantityError for a value that is not finite: no such number may reach an instrument.
    """
    if not math.isfinite(value):
        raise QuantityError(f"{value!r} is not a number that an instrument can be sent")
    text = repr(float(value)).upper().removesuffix(".0")
    return f"{text} {suffix}" if suffix else text


def whole_number(value: float) -> str:
    """Write a whole number (NR1). Raises QuantityError for any other."""
    if not (math.isfinite(value) and float(value).is_integer()):
        raise QuantityError(f"{value!r} is not a whole number")
    return str(int(value))


def word(text: str) -> str:
    """Return `text` if it is one SCPI word (a letter, then letters and digits).

    Raises QuantityError for anything else.
    """
    if not (_WORD.fullmatch(text) and text.isascii()):
        raise QuantityError(f"{text!r} is not one SCPI word (a letter, then letters and digits)")
    return text


def parse_number(text: str) -> float:
    """Read NR1, NR2 or NR3; 9.9E37 is infinity, -9.9E37 its negative, 9.91E37 not a number. Raises ReplyError."""
    text = text.strip()
    if not (_NUMBER.fullmatch(text) and text.isascii()):
        raise ReplyError(f"{text!r} is not a number (NR1, NR2 or NR3)")
    value = float(text)
    if abs(value) < INFINITY:
        return value
    if abs(value) == NOT_A_NUMBER:
        return math.nan
    return math.copysign(math.inf, value)


def parse_switch(text: str) -> bool:
    """Read a boolean reply: 0 or 1 (also OFF or ON). Raises ReplyError."""
    try:
        return _SWITCH[text.strip().upper()]
    except KeyError:
        raise ReplyError(f"{text!r} is not a boolean (0 or 1)") from None


def quoted(text: str) -> str:
    """Write string response data: quotes around, inner ones doubled."""
    return '"' + text.replace('"', '""') + '"'


def parse_text(text: str) -> str:
    """Read a string ("..." or '...', inner quotes doubled) or plain character data.

    Raises ReplyError for a loose quote.
    """
    text = text.strip()
    if text[:1] not in ('"', "'"):
        return text
    quote = text[0]
    inner = text[1:-1]
    if len(text) < 2 or text[-1] != quote or quote in inner.replace(quote * 2, ""):
        raise ReplyError(f"the string {text!r} does not end where it should")
    return inner.replace(quote * 2, quote)


def split(text: str, separator: str) -> list[str]:
    """Split at `separator` outside of quotes; "" gives one empty part.

    Raises ReplyError for a quote that never closes.
    """
    if '"' not in text and "'" not in text:
        return text.split(separator)
    parts, start, quote = [], 0, ""
    for position, character in enumerate(text):
        if quote:
            quote = "" if character == quote else quote
        elif character in "\"'":
            quote = character
        elif character == separator:
            parts.append(text[start:position])
            start = position + 1
    if quote:
        raise ReplyError(f"a string in {text!r} never ends")
    return [*parts, text[start:]]


def parse_list(text: str) -> list[float]:
    """Read a list of numbers. Raises ReplyError."""
    return [parse_number(part) for part in split(text, ",")]


@dataclass(frozen=True, slots=True)
class ErrorEntry:
    """One entry of the error queue: number (0: no error) and text."""

    number: int
    text: str

    def __str__(self) -> str:
        return f"{self.number},{quoted(self.text)}"


#: What an empty queue answers.
NO_ERROR = '0,"No error"'


def advice(number: int) -> str:
    """Return what to do about an entry of the error queue, by its class (SCPI-1999 volume 2, from memory)."""
    if -200 < number <= -100:
        return "It did not understand: compare the dialect with its manual"
    if -300 < number <= -200:
        return "It could not do that as it stands: look at its own screen, and at its limits in the bench file"
    if -500 < number <= -400:
        return "Questions and answers got out of step: check that nobody else talks to it"
    return "Its manual says what this number means"


def parse_error(text: str) -> ErrorEntry:
    """Read one entry of SYSTem:ERRor?: -113,"Undefined header". Raises ReplyError."""
    code, *rest = split(text.strip(), ",")
    message = ",".join(rest).strip()
    if not re.fullmatch(r"[+-]?\d{1,5}", code.strip(), re.ASCII) or message[:1] not in ('"', "'"):
        raise ReplyError(f'{text!r} is not an entry of the error queue (such as 0,"No error")')
    return ErrorEntry(int(code), parse_text(message))


def block_digits(head: bytes) -> int:
    """Read the first two bytes of a block, "#n": how many digits of length follow (0: length not given).

    Raises ReplyError.
    """
    if len(head) < 2 or head[:1] != b"#" or not head[1:2].isdigit():
        raise ReplyError(f"a block begins with # and a digit; this begins with {head[:2]!r}")
    return int(head[1:2])


def block_length(digits: bytes) -> int:
    """Read the length of a definite block from its digits. Raises ReplyError."""
    if not _DIGITS.fullmatch(digits):
        raise ReplyError(f"{digits!r} is not the length of a block")
    return int(digits)


def parse_block(message: bytes) -> bytes:
    """Return the payload of a whole message that is one block, definite (#216...) or not (#0... to the line's end).

    Raises ReplyError for a block that is shorter than its header says or is followed by something else.
    """
    digits = block_digits(message[:2])
    if digits == 0:
        if not message.endswith(b"\n"):
            raise ReplyError("a block of unstated length (#0) ends with a line feed; this one does not")
        return message[2:-1]
    start = 2 + digits
    length = block_length(message[2:start])
    payload, rest = message[start : start + length], message[start + length :]
    if len(payload) < length:
        raise ReplyError(f"the block's header says {length} bytes, {len(payload)} arrived")
    if rest not in (b"", b"\n", b"\r\n"):
        raise ReplyError(f"the block's header says {length} bytes, {len(rest)} more arrived")
    return payload


def make_block(payload: bytes) -> bytes:
    """Write a definite-length block: b"HELLO" -> b"#15HELLO"."""
    length = str(len(payload)).encode()
    return b"#%d%b%b" % (len(length), length, payload)


def parse_floats(payload: bytes | memoryview, count: int) -> FloatArray:
    """Return `count` numbers from big-endian float64. Raises ReplyError for another count, NaN, infinity or 9.9E37."""
    if len(payload) != 8 * count:
        raise ReplyError(f"{count} numbers of 8 bytes were expected ({8 * count} bytes), {len(payload)} bytes arrived")
    values = np.frombuffer(payload, dtype=">f8").astype(np.float64)
    if count and not (values.min() > -INFINITY and values.max() < INFINITY):
        where = int(np.flatnonzero(~(np.abs(values) < INFINITY))[0])
        raise ReplyError(f"number {where + 1} of {count} is {values[where]}: the instrument has no value there")
    return values


def make_floats(values: FloatArray) -> bytes:
    """Write numbers as a definite-length block of big-endian float64 (REAL,64 with FORMat:BORDer NORMal)."""
    return make_block(np.asarray(values, dtype=">f8").tobytes())
