"""Dialects: the headers of one make of instrument, as data, and how typed values become text.

An entry has a `set` form, an `ask` form or both. Placeholders stand for values: "SOURce{channel}:VOLTage {voltage}".
`carries` gives the kind of each, so a value is always written by us (with its unit), and never as text that somebody
passed in: it cannot carry a second command. A file of a make extends the generic dialect of a driver entry by entry,
field by field; an entry of the generic dialect that has neither form says what the driver needs where the standard is
silent.
"""

from __future__ import annotations

import re
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from typing import Annotated, Any, Literal, cast

from pydantic import AfterValidator, Field

from benchrun.contract.kinds import Kind
from benchrun.contract.roles import Value
from benchrun.errors import InstrumentError, QuantityError, ReplyError
from benchrun.fields import Duration, Number, Text
from benchrun.quantities import parse
from benchrun.visa import scpi
from benchrun.visa.carried import Carried, CarriedField
from benchrun.yaml_source import Strict

#: The kind in which a tolerance on a kind is written.
TOLERANCE_KIND: dict[str, str] = {"level": "ratio", "temperature": "temperature-difference"}
#: Relative difference below which two numbers are the same, whatever the tolerance: text has 15 digits at least.
SAME = 1e-12

_PLACEHOLDER = re.compile(r"\{([a-z][a-z0-9_]*)\}")
_NODE = r"[A-Za-z][A-Za-z0-9_]*(?:\{[a-z][a-z0-9_]*\})?"
_HEADER = rf"(?:\*[A-Z]{{3}}|{_NODE}(?::{_NODE})*)"
_PARAMETER = r"(?:\{[a-z][a-z0-9_]*\}|[A-Za-z][A-Za-z0-9]*|[+-]?[0-9.]+(?:[Ee][+-]?[0-9]+)?)"
_PARAMETERS = rf"(?: {_PARAMETER}(?:,{_PARAMETER})*)?"
SET_PATTERN = rf"^{_HEADER}{_PARAMETERS}$"
ASK_PATTERN = rf"^{_HEADER}\?{_PARAMETERS}$"


def _one_command(given: str | None, pattern: str, example: str) -> str | None:
    if given is not None and not re.fullmatch(pattern, given, re.ASCII):
        text = "a header, then parameters that are words, numbers or placeholders, separated by commas"
        raise ValueError(f"{given!r} is not one command such as '{example}': {text}")
    return given


def _set_form(given: str | None) -> str | None:
    return _one_command(given, SET_PATTERN, "SOURce:POWer {level}")


def _ask_form(given: str | None) -> str | None:
    return _one_command(given, ASK_PATTERN, "SOURce:POWer?")


SetForm = Annotated[str | None, AfterValidator(_set_form), Field(json_schema_extra={"pattern": SET_PATTERN})]
AskForm = Annotated[str | None, AfterValidator(_ask_form), Field(json_schema_extra={"pattern": ASK_PATTERN})]


class EntryText(Strict):
    """One entry as written in a dialect file."""

    set: SetForm = Field(default=None, description="the set form; its capitals give the short form")
    ask: AskForm = Field(default=None, description="the query form")
    carries: dict[str, CarriedField] = Field(default={}, description="kind of each placeholder")
    reply: CarriedField | None = Field(
        default=None, description="kind of the reply, where the set form does not say it"
    )
    tolerance: str | None = Field(default=None, description="how far the value read back may be from the value sent")
    deadline: Duration | None = Field(default=None, description="longest time the exchange may take")


class Timing(Strict):
    """How long one make takes, for deadlines and estimates."""

    point: Duration = Field(default=1e-3, description="time for each point beside the filter's")
    sweep: Duration = Field(default=20e-3, description="time for each sweep beside its points'")
    filter_periods: Number = Field(default=1.5, description="time in the filter, in periods of the IF bandwidth")


class DialectText(Strict):
    """A *.dialect.yaml file."""

    benchrun: Literal[1]
    title: Text = ""
    options: bool | None = Field(default=None, description="whether *OPT? is answered")
    timing: Timing | None = None
    entries: dict[str, EntryText] = Field(default={}, description="entries by the name that the driver uses")


@dataclass(frozen=True, slots=True)
class Template:
    """A header and parameters with placeholders, in short form: alternating text and names."""

    pieces: tuple[str, ...]

    @classmethod
    def of(cls, text: str) -> Template:
        """Take a form apart at its placeholders."""
        pieces = _PLACEHOLDER.split(text)
        return cls(tuple(piece if index % 2 else scpi.short_form(piece) for index, piece in enumerate(pieces)))

    @property
    def names(self) -> tuple[str, ...]:
        """Names of the placeholders, in order."""
        return self.pieces[1::2]

    @property
    def header_names(self) -> tuple[str, ...]:
        """Names of the placeholders in the header (numeric suffixes)."""
        found = []
        for text, name in zip(self.pieces[::2], self.names, strict=False):
            if " " in text:
                break
            found.append(name)
        return tuple(found)

    def fill(self, carries: Mapping[str, Carried], values: Mapping[str, Value]) -> str:
        """Return the text with the values in place. Raises QuantityError for a value missing or not of its kind."""
        if len(self.pieces) == 1:
            return self.pieces[0]
        parts = list(self.pieces)
        for index in range(1, len(parts), 2):
            parts[index] = _filled(parts[index], carries, values)
        return "".join(parts)


def _filled(name: str, carries: Mapping[str, Carried], values: Mapping[str, Value]) -> str:
    if name not in values:
        raise QuantityError(f"no value was given for {{{name}}}")
    try:
        return carries[name].write(values[name])
    except QuantityError as error:
        raise QuantityError(f"{name}: {error}") from None


@dataclass(frozen=True, slots=True)
class Entry:
    """One entry, ready for use. `carried` is the placeholder that confirm() compares with the reply, "" for none."""

    name: str
    set: Template | None
    ask: Template | None
    carries: Mapping[str, Carried]
    reply: Carried | None
    carried: str
    tolerance: float
    deadline_s: float | None
    level: str = field(default="")

    def set_text(self, values: Mapping[str, Value]) -> str:
        """Return the set form with these values.

        Raises InstrumentError where there is none, QuantityError for a bad value.
        """
        if self.set is None:
            raise InstrumentError(f"the dialect has no set form of {self.name!r}")
        return self.set.fill(self.carries, values)

    def ask_text(self, values: Mapping[str, Value]) -> str:
        """Return the query form with these values.

        Raises InstrumentError where there is none, QuantityError for a bad value.
        """
        if self.ask is None:
            raise InstrumentError(f"the dialect has no query form of {self.name!r}")
        return self.ask.fill(self.carries, values)

    def read(self, text: str) -> Any:
        """Return the typed reply. Raises ReplyError."""
        if self.reply is None or self.reply.kind == "block":
            raise ReplyError(f"the dialect does not say what {self.name!r} answers in text")
        return self.reply.read(text)

    def switches_off(self, values: Mapping[str, Value]) -> bool:
        """Whether the set form with these values does nothing but switch something off."""
        carried = self.carries.get(self.carried)
        return carried is not None and carried.kind == "switch" and not values.get(self.carried, True)

    def agrees(self, sent: Value, stands: Value) -> bool:
        """Whether what stands is what was sent, within the tolerance."""
        if isinstance(sent, str) or not isinstance(sent, Sequence):
            return self._one_agrees(sent, cast("float | str", stands))
        there = cast("Sequence[float | str]", stands)
        return len(sent) == len(there) and all(map(self._one_agrees, sent, there))

    def _one_agrees(self, sent: float | str, stands: float | str) -> bool:
        if isinstance(sent, str) or isinstance(stands, str):
            return self._word(sent) == self._word(stands)
        return abs(sent - stands) <= max(self.tolerance, SAME * abs(sent))

    def _word(self, value: float | str) -> str:
        words = self.carries[self.carried].words
        return next((word for word in words if scpi.is_form_of(str(value), word)), str(value)).upper()


def _carried(set_form: Template | None) -> str:
    """Name of the one placeholder that is a parameter of the set form, "" where there is none or more than one."""
    names = [name for name in set_form.names if name not in set_form.header_names] if set_form else []
    return names[0] if len(names) == 1 else ""


def _tolerance(text: EntryText, reply: Carried | None) -> float:
    if text.tolerance is None or reply is None:
        return 0.0
    return parse(text.tolerance, cast(Kind, TOLERANCE_KIND.get(reply.kind, reply.kind)))


def compile_entry(name: str, text: EntryText) -> Entry:
    """Make an entry ready for use.

    Raises QuantityError (a tolerance or deadline) or ValueError (forms that do not fit).
    """
    set_form = Template.of(text.set) if text.set else None
    ask_form = Template.of(text.ask) if text.ask else None
    for form in filter(None, (set_form, ask_form)):
        _check_placeholders(form, text.carries)
    carried = _carried(set_form)
    reply = text.reply or (text.carries[carried] if carried else None)
    if ask_form and reply is None:
        raise ValueError("it has a query form, and nothing says what the reply is: add `reply:` with its kind")
    return Entry(
        name=name,
        set=set_form,
        ask=ask_form,
        carries=text.carries,
        reply=reply,
        carried=carried,
        tolerance=_tolerance(text, reply),
        deadline_s=text.deadline,
        level=next((name for name, one in text.carries.items() if one.kind == "level"), ""),
    )


def _check_placeholders(form: Template, carries: Mapping[str, Carried]) -> None:
    for name in form.names:
        if name not in carries:
            raise ValueError(f"nothing says what {{{name}}} carries; known are {', '.join(carries) or 'none'}")
    for name in form.header_names:
        if carries[name].kind != "count" or carries[name].list:
            raise ValueError(f"{{{name}}} is part of a header, so it can only carry one count")


@dataclass(frozen=True, slots=True)
class Dialect:
    """All entries of one instrument, by name, and how long things take (seconds)."""

    entries: Mapping[str, Entry]
    options: bool = False
    point_s: float = 1e-3
    sweep_s: float = 20e-3
    filter_periods: float = 1.5

    def has(self, name: str) -> bool:
        """Whether the entry is there with a form to send."""
        entry = self.entries.get(name)
        return entry is not None and (entry.set is not None or entry.ask is not None)

    def __getitem__(self, name: str) -> Entry:
        """Return an entry. Raises InstrumentError where there is none."""
        try:
            return self.entries[name]
        except KeyError:
            raise InstrumentError(f"the dialect has no entry {name!r}; it has {', '.join(self.entries)}") from None


def merged(base: DialectText, over: DialectText | None) -> DialectText:
    """Return `base` with the fields that `over` gives in their place."""
    if over is None:
        return base
    entries = dict(base.entries)
    for name, entry in over.entries.items():
        under = entries.get(name, EntryText())
        changes = {key: getattr(entry, key) for key in entry.model_fields_set}
        entries[name] = under.model_copy(update={**changes, "carries": {**under.carries, **entry.carries}})
    update: dict[str, Any] = {key: getattr(over, key) for key in over.model_fields_set}
    return base.model_copy(update={**update, "entries": entries})


def compile_dialect(text: DialectText) -> tuple[Dialect, dict[str, str]]:
    """Make a dialect ready for use; returns it and what is wrong, by the entry's name."""
    entries: dict[str, Entry] = {}
    wrong: dict[str, str] = {}
    for name, entry in text.entries.items():
        try:
            entries[name] = compile_entry(name, entry)
        except (ValueError, QuantityError) as error:
            wrong[name] = str(error)
    timing = text.timing or Timing()
    dialect = Dialect(entries, bool(text.options), timing.point, timing.sweep, timing.filter_periods)
    return dialect, wrong


def missing(dialect: Dialect, names: Iterable[str]) -> tuple[str, ...]:
    """Names of the entries that the dialect does not have."""
    return tuple(name for name in names if not dialect.has(name))
