"""Program messages into program message units (IEEE 488.2 section 7, SCPI-1999 volume 1 section 6).

A unit is a header and its parameters. What a header means is not known here; where a parameter ends is.
"""

from __future__ import annotations

import re
from collections.abc import Iterator
from dataclasses import dataclass
from typing import Literal

from .scpi_errors import ScpiError

Kind = Literal["number", "word", "string", "block", "expression"]

#: White space of IEEE 488.2 7.4.1.2: every control character but the line feed, and the blank.
_WS = r"[\x00-\x09\x0b-\x20]*"
_SKIP = re.compile(_WS)
_HEADER = re.compile(r"(\*[A-Za-z]+|:?[A-Za-z][A-Za-z0-9_]*(?::[A-Za-z][A-Za-z0-9_]*)*)(\??)")
_NUMBER = re.compile(
    rf"([+-]?(?:[0-9]+\.?[0-9]*|\.[0-9]+))(?:{_WS}[Ee]{_WS}([+-]?[0-9]+))?{_WS}(/?[A-Za-z][A-Za-z0-9./-]*)?"
)
_RADIX = re.compile(r"#(?:[Hh]([0-9A-Fa-f]+)|[Qq]([0-7]+)|[Bb]([01]+))")
_WORD = re.compile(r"[A-Za-z][A-Za-z0-9_]*")
_STRING = re.compile(r"\"((?:[^\"]|\"\")*)\"|'((?:[^']|'')*)'")
_PLAIN = re.compile(r"[\x00-\x7f]*")
_LONGEST_DIGITS = 255
_LARGEST_EXPONENT = 32000
_LONGEST_WORD = 12


@dataclass(frozen=True, slots=True)
class Token:
    """One parameter as written; `suffix` is a number's unit in upper case, `value` a number's value."""

    kind: Kind
    text: str
    suffix: str = ""
    value: float = 0.0


@dataclass(frozen=True, slots=True)
class Unit:
    """One program message unit: header in upper case without the question mark, and its parameters."""

    header: str
    query: bool
    tokens: tuple[Token, ...]


def units(text: str) -> Iterator[Unit]:
    """Yield the units of one program message (terminator removed, bytes decoded as Latin-1).

    Raises ScpiError (-1xx) at the first thing that is not a program message unit.
    """
    position = _skip(text, 0)
    while position < len(text):
        unit, position = _unit(text, position)
        yield unit
        if position < len(text):
            position = _skip(text, position + 1)  # over the semicolon


def _skip(text: str, position: int) -> int:
    found = _SKIP.match(text, position)
    return found.end() if found else position


def _unit(text: str, position: int) -> tuple[Unit, int]:
    found = _HEADER.match(text, position)
    if found is None:
        raise ScpiError(-101 if not _is_plain(text[position]) else -102, f"at {text[position : position + 12]!r}")
    header, query = found[1].upper(), bool(found[2])
    position = found.end()
    after = _skip(text, position)
    if after == len(text) or text[after] == ";":
        return Unit(header, query, ()), after
    if after == position:
        number = -111 if _is_plain(text[after]) else -101
        raise ScpiError(number, f"after {header}")
    tokens, position = _tokens(text, after)
    return Unit(header, query, tokens), position


def _is_plain(character: str) -> bool:
    return ord(character) < 0x80


def _tokens(text: str, position: int) -> tuple[tuple[Token, ...], int]:
    tokens = []
    while True:
        token, position = _token(text, position)
        tokens.append(token)
        position = _skip(text, position)
        if position == len(text) or text[position] == ";":
            return tuple(tokens), position
        if text[position] != ",":
            raise ScpiError(-103, f"at {text[position : position + 12]!r}")
        position = _skip(text, position + 1)


def _token(text: str, position: int) -> tuple[Token, int]:
    first = text[position : position + 1]
    if first in "\"'" and first:
        return _string(text, position)
    if first == "#":
        return _hash(text, position)
    if first == "(":
        return _expression(text, position)
    if first.isalpha() and _is_plain(first):
        return _word(text, position)
    return _number(text, position)


def _number(text: str, position: int) -> tuple[Token, int]:
    found = _NUMBER.match(text, position)
    if found is None:
        raise ScpiError(-102, "a parameter is missing" if position >= len(text) else f"at {text[position]!r}")
    mantissa, exponent, suffix = found.groups(default="")
    if len(mantissa) > _LONGEST_DIGITS:
        raise ScpiError(-124)
    if len(exponent) > 6 or abs(int(exponent or 0)) > _LARGEST_EXPONENT:
        raise ScpiError(-123)
    if len(suffix) > _LONGEST_WORD:
        raise ScpiError(-131, suffix[:_LONGEST_WORD])
    value = float(f"{mantissa}e{exponent or 0}")
    return Token("number", found[0], suffix.upper(), value), found.end()


def _word(text: str, position: int) -> tuple[Token, int]:
    found = _WORD.match(text, position)
    assert found is not None
    if len(found[0]) > _LONGEST_WORD:
        raise ScpiError(-144, found[0][: _LONGEST_WORD + 1])
    return Token("word", found[0].upper()), found.end()


def _string(text: str, position: int) -> tuple[Token, int]:
    found = _STRING.match(text, position)
    if found is None:
        raise ScpiError(-151, "the closing quote is missing")
    quote = text[position]
    inner = found[1] if found[1] is not None else found[2]
    return Token("string", inner.replace(quote * 2, quote)), found.end()


def _expression(text: str, position: int) -> tuple[Token, int]:
    end = text.find(")", position)
    if end < 0:
        raise ScpiError(-171, "the closing bracket is missing")
    return Token("expression", text[position + 1 : end]), end + 1


def _hash(text: str, position: int) -> tuple[Token, int]:
    found = _RADIX.match(text, position)
    if found is not None:
        base = 16 if found[1] else 8 if found[2] else 2
        return Token("number", found[0], "", float(int(found[found.lastindex or 1], base))), found.end()
    start, end = block_span(text, position)
    if end > len(text):
        raise ScpiError(-161, f"{end - len(text)} bytes are missing")
    return Token("block", text[start:end]), end


def block_span(text: str, position: int) -> tuple[int, int]:
    """Return where the payload of the block at `position` starts and ends (IEEE 488.2 7.7.6 and 7.7.7).

    The end may lie beyond the text. Raises ScpiError -161 where no block begins there.
    """
    digits = text[position + 1 : position + 2]
    if digits == "0":
        return position + 2, len(text)
    start = position + 2 + int(digits) if digits.isdecimal() and _is_plain(digits) else 0
    length = text[position + 2 : start]
    if not (start and length.isdecimal() and length.isascii() and len(length) == int(digits)):
        raise ScpiError(-161, f"at {text[position : position + 12]!r}")
    return start, start + int(length)
