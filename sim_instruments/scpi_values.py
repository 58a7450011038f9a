"""Parameters of commands, and response data (IEEE 488.2 sections 7.7 and 8.7, SCPI-1999 volume 1 section 7)."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass
from typing import Any, Literal, Protocol

import numpy as np
import numpy.typing as npt

from .scpi_errors import ScpiError
from .scpi_headers import declared_forms
from .scpi_lexer import Kind, Token

#: A limit is a number, or a function of the instrument and the header's numeric suffixes.
Limit = float | Callable[..., float]

INFINITY, NOT_A_NUMBER = 9.9e37, 9.91e37  # SCPI-1999 volume 1 section 7.2.1

#: Suffix multipliers of IEEE 488.2 table 7-2. M is milli, but MHZ and MOHM are mega.
_MULTIPLIERS = {
    "": 1.0, "EX": 1e18, "PE": 1e15, "T": 1e12, "G": 1e9, "MA": 1e6, "K": 1e3, "M": 1e-3, "U": 1e-6, "N": 1e-9,
    "P": 1e-12, "F": 1e-15, "A": 1e-18,
}  # fmt: skip

#: What a data element of the wrong kind is called.
_NOT_ALLOWED: dict[Kind, int] = {"number": -128, "word": -148, "string": -158, "block": -168, "expression": -178}


def unit_scale(suffix: str, base: str) -> float:
    """Return the factor of a unit suffix in upper case: unit_scale("KHZ", "HZ") is 1e3. Raises ScpiError -131."""
    if suffix in {"MHZ", "MOHM"} and suffix.endswith(base):
        return 1e6
    prefix = suffix.removesuffix(base)
    if not suffix.endswith(base) or prefix not in _MULTIPLIERS:
        raise ScpiError(-131, suffix)
    return _MULTIPLIERS[prefix]


class Parameter(Protocol):
    """One parameter of a command: how it is read and how the answer to its query looks."""

    @property
    def many(self) -> bool:
        """Whether it takes all the remaining data elements."""

    def read(self, tokens: Sequence[Token], owner: Any, suffixes: tuple[int, ...]) -> Any:
        """Return the value; raises ScpiError."""

    def show(self, value: Any) -> str:
        """Return response data."""


def _expect(token: Token, *kinds: Kind) -> None:
    if token.kind not in kinds:
        raise ScpiError(_NOT_ALLOWED[token.kind], token.text[:20])


def _limit(limit: Limit, owner: Any, suffixes: tuple[int, ...]) -> float:
    return limit(owner, *suffixes) if callable(limit) else limit


@dataclass(frozen=True)
class Number:
    """A number with a unit and a range; MINimum, MAXimum and DEFault stand for its limits and its *RST value."""

    unit: str
    low: Limit
    high: Limit
    default: Limit
    integer: bool = False
    many: bool = False

    def read(self, tokens: Sequence[Token], owner: Any, suffixes: tuple[int, ...]) -> float:
        """Return the value in its base unit; raises ScpiError -222 outside the range."""
        return self.element(tokens[0], owner, suffixes)

    def element(self, token: Token, owner: Any, suffixes: tuple[int, ...]) -> float:
        """Return one value."""
        _expect(token, "number", "word")
        value = self._word(token, owner, suffixes) if token.kind == "word" else self._scaled(token)
        value = float(math.floor(value + 0.5)) if self.integer and math.isfinite(value) else value
        low, high = _limit(self.low, owner, suffixes), _limit(self.high, owner, suffixes)
        if not low <= value <= high:  # also refuses NaN
            raise ScpiError(-222, f"{token.text[:24]} is not in {low:g} to {high:g} {self.unit}".rstrip())
        return value

    def _scaled(self, token: Token) -> float:
        if not token.suffix:
            return token.value
        if not self.unit:
            raise ScpiError(-138, token.suffix)
        return token.value * unit_scale(token.suffix, self.unit)

    def _word(self, token: Token, owner: Any, suffixes: tuple[int, ...]) -> float:
        limits = {"MIN": self.low, "MINIMUM": self.low, "MAX": self.high, "MAXIMUM": self.high}
        limits |= {"DEF": self.default, "DEFAULT": self.default}
        specials = {"INF": math.inf, "INFINITY": math.inf, "NINF": -math.inf, "NINFINITY": -math.inf, "NAN": math.nan}
        if token.text in specials:
            return specials[token.text]
        if token.text not in limits:
            raise ScpiError(-141, token.text)
        return _limit(limits[token.text], owner, suffixes)

    def show(self, value: float) -> str:
        """Return NR1 for whole numbers, NR2 or NR3 for the others."""
        return str(int(value)) if self.integer else number(value)


@dataclass(frozen=True)
class LimitName:
    """The parameter of a number's query: MINimum, MAXimum or DEFault instead of what is set."""

    number: Number
    many: bool = False

    def read(self, tokens: Sequence[Token], owner: Any, suffixes: tuple[int, ...]) -> float:
        """Return the limit that is asked for; raises ScpiError -128 for a number."""
        _expect(tokens[0], "word")
        return self.number.element(tokens[0], owner, suffixes)

    def show(self, value: float) -> str:
        """Return the number."""
        return self.number.show(value)


@dataclass(frozen=True)
class NumberList:
    """A list of numbers, or one REAL,64 block of them in the instrument's byte order."""

    element: Number
    longest: int
    many: bool = True

    def read(self, tokens: Sequence[Token], owner: Any, suffixes: tuple[int, ...]) -> tuple[float, ...]:
        """Return the values; raises ScpiError -223 for too many, -222 for one out of range."""
        if tokens[0].kind == "block":
            tokens = self._unpacked(tokens, owner)
        if len(tokens) > self.longest:
            raise ScpiError(-223, f"{len(tokens)} of at most {self.longest}")
        return tuple(self.element.element(token, owner, suffixes) for token in tokens)

    def _unpacked(self, tokens: Sequence[Token], owner: Any) -> Sequence[Token]:
        payload = tokens[0].text.encode("latin-1")
        if len(tokens) > 1:
            raise ScpiError(-108)
        if len(payload) % 8 or not payload:
            raise ScpiError(-161, f"{len(payload)} bytes are not float64")
        values = np.frombuffer(payload, getattr(owner, "byte_order", ">") + "f8")
        return [Token("number", repr(float(value)), "", float(value)) for value in values]

    def show(self, value: Sequence[float]) -> str:
        """Return the numbers with commas."""
        return ",".join(map(number, value))


@dataclass(frozen=True)
class Boolean:
    """ON, OFF, or a number that is rounded: 0 is off, any other is on."""

    many: bool = False

    def read(self, tokens: Sequence[Token], owner: Any, suffixes: tuple[int, ...]) -> bool:  # noqa: ARG002
        """Return the value; raises ScpiError -141."""
        token = tokens[0]
        _expect(token, "number", "word")
        if token.kind == "word":
            if token.text not in {"ON", "OFF"}:
                raise ScpiError(-141, token.text)
            return token.text == "ON"
        if token.suffix:
            raise ScpiError(-138, token.suffix)
        return not -0.5 <= token.value < 0.5

    def show(self, value: bool) -> str:
        """Return 1 or 0."""
        return "1" if value else "0"


@dataclass(frozen=True)
class Choice:
    """One word of several, in long or short form; the value is the short form."""

    words: tuple[str, ...]
    many: bool = False

    def read(self, tokens: Sequence[Token], owner: Any, suffixes: tuple[int, ...]) -> str:  # noqa: ARG002
        """Return the short form; raises ScpiError -224."""
        _expect(tokens[0], "word")
        for word in self.words:
            if tokens[0].text in declared_forms(word):
                return declared_forms(word)[0]
        raise ScpiError(-224, f"{tokens[0].text} is none of {', '.join(self.words)}")

    def show(self, value: str) -> str:
        """Return the short form."""
        return value


@dataclass(frozen=True)
class WordList:
    """A list of words out of those that the instrument knows, each at most once."""

    allowed: Callable[[Any], Sequence[str]]
    many: bool = True

    def read(self, tokens: Sequence[Token], owner: Any, suffixes: tuple[int, ...]) -> tuple[str, ...]:  # noqa: ARG002
        """Return the words; raises ScpiError -224."""
        for token in tokens:
            _expect(token, "word")
        words, allowed = tuple(token.text for token in tokens), self.allowed(owner)
        if len(set(words)) < len(words) or not set(words) <= set(allowed):
            raise ScpiError(-224, f"{','.join(words)[:60]}: each of {','.join(allowed)} at most once")
        return words

    def show(self, value: Sequence[str]) -> str:
        """Return the words with commas."""
        return ",".join(value)


@dataclass(frozen=True)
class DataFormat:
    """The two parameters of FORMat:DATA: a type and its length in bits."""

    lengths: tuple[tuple[str, int], ...] = (("ASC", 0), ("REAL", 64), ("REAL", 32))
    many: bool = True

    def read(self, tokens: Sequence[Token], owner: Any, suffixes: tuple[int, ...]) -> tuple[str, int]:
        """Return type and length; raises ScpiError -224 for one the instrument lacks."""
        if len(tokens) > 2:
            raise ScpiError(-108)
        kind = Choice(("ASCii", "REAL")).read(tokens, owner, suffixes)
        default = 64 if kind == "REAL" else 0
        length = Number("", 0, 64, default, integer=True).read(tokens[1:], owner, suffixes) if tokens[1:] else default
        if (kind, int(length)) not in self.lengths:
            raise ScpiError(-224, f"{kind},{length:g}")
        return kind, int(length)

    def show(self, value: tuple[str, int]) -> str:
        """Return type and length."""
        return f"{value[0]},{value[1]}"


@dataclass(frozen=True)
class ChannelList:
    """A channel list with one channel: (@2)."""

    channels: int
    many: bool = False

    def read(self, tokens: Sequence[Token], owner: Any, suffixes: tuple[int, ...]) -> int:  # noqa: ARG002
        """Return the channel; raises ScpiError -171 or -222."""
        _expect(tokens[0], "expression")
        mark, text = tokens[0].text[:1], tokens[0].text[1:].strip()
        if mark != "@" or not (text.isascii() and text.isdecimal()):
            raise ScpiError(-171, tokens[0].text[:20])
        if not 1 <= int(text) <= self.channels:
            raise ScpiError(-222, f"channel {text}")
        return int(text)

    def show(self, value: int) -> str:
        """Return the list."""
        return f"(@{value})"


def number(value: float) -> str:
    """Return NR2 or NR3 response data that reads back to the same float64; the special numbers for inf and NaN."""
    if not math.isfinite(value):
        value = NOT_A_NUMBER if math.isnan(value) else math.copysign(INFINITY, value)
    mantissa, exponent, power = repr(float(value)).partition("e")
    if not exponent:
        return mantissa
    return f"{mantissa if '.' in mantissa else mantissa + '.0'}E{int(power):+03d}"


def block(payload: bytes) -> bytes:
    """Return definite-length arbitrary block response data (IEEE 488.2 8.7.9)."""
    length = str(len(payload))
    return f"#{len(length)}{length}".encode() + payload


def numbers(values: npt.NDArray[np.float64], kind: str, bits: int, byte_order: Literal[">", "<"]) -> bytes:
    """Return an array as FORMat:DATA asks for: an ASCII list, or a block of IEEE 754 numbers."""
    if kind == "ASC":
        return ",".join(map(number, values.tolist())).encode()
    return block(np.ascontiguousarray(values, dtype=f"{byte_order}f{bits // 8}").tobytes())
