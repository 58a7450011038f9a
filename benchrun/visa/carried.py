"""What placeholders and replies carry: typed values, written by us with their unit and read back strictly.

No value is ever text that somebody passed in: a number is formatted here, and a word is one SCPI word from a list or of
a strict form. So no value can carry a second command.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Annotated, Any, Literal, cast

from pydantic import BeforeValidator, Field, model_validator

from benchrun.contract.kinds import Kind
from benchrun.contract.roles import Value
from benchrun.errors import QuantityError, ReplyError
from benchrun.visa import scpi
from benchrun.yaml_source import Strict

#: Suffixes that numbers are sent with, and what one of them is in the kind's own unit (IEEE 488.2 7.7.3, SCPI-1999
#: volume 1, 7.2). The first of each kind is the one used where an entry names none.
SUFFIXES: dict[str, dict[str, float]] = {
    "frequency": {"HZ": 1.0, "KHZ": 1e3, "MHZ": 1e6, "GHZ": 1e9},
    "level": {"DBM": 1.0},
    "ratio": {"DB": 1.0},
    "voltage": {"V": 1.0, "MV": 1e-3, "UV": 1e-6},
    "current": {"A": 1.0, "MA": 1e-3, "UA": 1e-6},
    "power": {"W": 1.0, "UW": 1e-6},
    "time": {"S": 1.0, "MS": 1e-3, "US": 1e-6, "NS": 1e-9},
    "temperature": {"CEL": 1.0},
    "temperature-difference": {"K": 1.0},
    "angle": {"RAD": 1.0, "DEG": 0.017453292519943295},
    "resistance": {"OHM": 1.0, "KOHM": 1e3, "MOHM": 1e6},
}

ReplyKind = Kind | Literal["block"]


def _spelled_out(given: object) -> object:
    """Let "frequency" stand for {kind: frequency}."""
    return {"kind": given} if isinstance(given, str) else given


class Carried(Strict):
    """What a placeholder or a reply carries: its kind, the suffix it travels in, and for text the words allowed."""

    kind: ReplyKind
    unit: str | None = Field(default=None, description="suffix as sent, such as MHZ; empty for none")
    list: bool = Field(default=False, description="several values, separated by commas")
    words: tuple[str, ...] = Field(
        default=(), description="for text: the words allowed, in long form with the short form's capitals"
    )

    @model_validator(mode="after")
    def _known(self) -> Carried:
        suffixes = SUFFIXES.get(self.kind, {})
        if self.unit and self.unit not in suffixes:
            known = ", ".join(suffixes) or "none at all"
            raise ValueError(f"unit {self.unit!r} does not fit kind {self.kind}; it takes {known}")
        if self.words and self.kind != "text":
            raise ValueError(f"words are for kind text, not {self.kind}")
        for word in self.words:
            scpi.word(word)
        return self

    @property
    def suffix(self) -> str:
        """The suffix that a value is sent with, "" for none."""
        return next(iter(SUFFIXES.get(self.kind, {})), "") if self.unit is None else self.unit

    @property
    def scale(self) -> float:
        """One of the suffix in the kind's own unit."""
        return SUFFIXES[self.kind][self.suffix] if self.suffix else 1.0

    def write(self, value: Value) -> str:
        """Return the text of a value. Raises QuantityError for a value that is not of this kind."""
        if not self.list:
            return self._write_one(cast("float | str | bool", value))
        if isinstance(value, str) or not isinstance(value, Sequence) or not value:
            raise QuantityError(f"{value!r} is not a list of values")
        return ",".join(self._write_one(one) for one in value)

    def _write_one(self, value: float | str | bool) -> str:
        if self.kind == "text":
            return self._write_word(value)
        if isinstance(value, str) or not isinstance(value, int | float):
            raise QuantityError(f"{value!r} is not a {self.kind}")
        if self.kind == "switch":
            return _write_switch(value)
        if self.kind == "count":
            return scpi.whole_number(value)
        return scpi.number(value / self.scale, self.suffix)

    def _write_word(self, value: object) -> str:
        if not isinstance(value, str):
            raise QuantityError(f"{value!r} is not a word")
        scpi.word(value)
        if not self.words:
            return value
        for allowed in self.words:
            if scpi.is_form_of(value, allowed):
                return scpi.short_form(allowed)
        raise QuantityError(f"{value!r} is not one of {', '.join(self.words)}")

    def read(self, text: str) -> Any:
        """Return the typed value of a reply.

        Raises ReplyError where it is not of this kind, or says it is not known.
        """
        if self.list:
            return tuple(self._read_one(part) for part in scpi.split(text, ","))
        return self._read_one(text)

    def _read_one(self, text: str) -> float | str | bool:
        if self.kind == "text":
            return self._read_word(scpi.parse_text(text))
        if self.kind == "switch":
            return scpi.parse_switch(text)
        value = scpi.parse_number(text) * self.scale
        if not abs(value) < scpi.INFINITY:
            raise ReplyError(f"the reply {text.strip()!r} means that there is no valid number ({value})")
        return value

    def _read_word(self, text: str) -> str:
        return next((allowed for allowed in self.words if scpi.is_form_of(text, allowed)), text)


def _write_switch(value: float) -> str:
    if value not in (0, 1):
        raise QuantityError(f"{value!r} is neither on (1) nor off (0)")
    return "1" if value else "0"


CarriedField = Annotated[Carried, BeforeValidator(_spelled_out)]
