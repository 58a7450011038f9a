"""Check the data of a file against a pydantic model, and tell every mistake with its place, in words for the reader."""

from __future__ import annotations

import difflib
from collections.abc import Callable, Mapping, Sequence
from typing import Any, TypeVar

from pydantic import BaseModel, ConfigDict, ValidationError, ValidationInfo, model_validator

from benchrun.errors import Problem
from benchrun.yaml_source.places import Mark, Path_, Placed, Source

Checked = TypeVar("Checked", bound=BaseModel)


class Strict(BaseModel):
    """Base of every model of a file: frozen, hyphens in the file for underscores here, unknown keys told."""

    model_config = ConfigDict(
        extra="forbid",
        frozen=True,
        populate_by_name=True,
        alias_generator=lambda name: name.rstrip("_").replace("_", "-"),
        arbitrary_types_allowed=True,
    )

    @model_validator(mode="before")
    @classmethod
    def _report_unknown_keys(cls, given: Any, info: ValidationInfo) -> Any:
        """Tell unknown keys with their places and leave them out, so that the rest is checked as well."""
        unknown_keys = (info.context or {}).get("unknown_keys")
        if unknown_keys is None or not isinstance(given, Placed):
            return given
        known = [f.alias or name for name, f in cls.model_fields.items()]
        strangers = [key for key in given if key not in known]
        for key in strangers:
            unknown_keys.append((given.keys_at[key], _unknown(key, known)))
        return {key: value for key, value in given.items() if key in known} if strangers else given


def _unknown(key: str, known: Sequence[str]) -> str:
    return f"'{key}' is not known here. {nearest(key, known) or 'Known: ' + (', '.join(known) or 'nothing') + '.'}"


def nearest(word: str, known: Sequence[str]) -> str:
    """Return "Did you mean 'this'?" for the nearest known word, "" where none is near."""
    near = difflib.get_close_matches(word, known, n=1, cutoff=0.6)
    return f"Did you mean '{near[0]}'?" if near else ""


def check(
    source: Source,
    model: type[Checked],
    within: Path_ = (),
    data: Any = None,
    context: Mapping[str, Any] | None = None,
) -> tuple[Checked | None, list[Problem]]:
    """Check data of a source against a model: (the model, []) or (None, all its problems with their places).

    `within` is the path of `data` in the source where only a part of it is checked. `context` is what the model's own
    validators find in info.context.
    """
    unknown_keys: list[tuple[Mark, str]] = []
    checked: Checked | None = None
    problems: list[Problem] = []
    given = source.data if data is None and not within else data
    try:
        checked = model.model_validate(given, context={**(context or {}), "unknown_keys": unknown_keys})
    except ValidationError as error:
        problems = _problems(source, within, error)
    problems += [Problem(source.file, *mark, message) for mark, message in unknown_keys]
    return (None if problems else checked), sorted(set(problems))


def _problems(source: Source, within: Path_, error: ValidationError) -> list[Problem]:
    """Return the problems of a model; where a value is of none of several types, the first of them speaks for all."""
    found: dict[tuple[Mark, bool], Problem] = {}
    for number, detail in enumerate(error.errors(include_url=False)):
        problem = _problem(source, within, detail)
        of_type = detail["type"].endswith(("_type", "_parsing"))
        found.setdefault(((problem.line, problem.column), True) if of_type else ((number, -1), False), problem)
    return list(found.values())


def _problem(source: Source, within: Path_, detail: Mapping[str, Any]) -> Problem:
    kind, path = detail["type"], (*within, *detail["loc"])
    # Said of what is written, not of what a validator has made of it.
    detail = {**detail, "input": source.written(path, detail["input"])}
    if path and path[-1] == "[key]":
        return source.problem(path[:-1], _message(detail), at_key=True)
    if kind == "missing":
        return source.problem(path[:-1], _missing(path[-1]), at_key=True)
    if kind == "extra_forbidden":
        return source.problem(path, f"'{path[-1]}' is not known here.", at_key=True)
    if kind.startswith("union_tag"):
        path = (*path, str(detail["ctx"]["discriminator"]).strip("'"))
    return source.problem(path, _message(detail))


def _missing(name: str | int) -> str:
    return f"'{name}' is missing here." if isinstance(name, str) else f"value {name + 1} of this list is missing."


def _message(detail: Mapping[str, Any]) -> str:
    say = _SAID.get(detail["type"])
    return say(detail["input"], detail.get("ctx", {})) if say else _as_it_is(detail)


def _as_it_is(detail: Mapping[str, Any]) -> str:
    message = str(detail["msg"]).removeprefix("Value error, ")
    if message.startswith("Input should be "):
        return f"{shown(detail['input'])} should be {message.removeprefix('Input should be ')}"
    return message


def shown(value: Any) -> str:
    """Return a value of a file for a message."""
    if value is None:
        return "nothing"
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, Mapping):
        name = next(iter(value), "")
        bare = len(value) == 1 and value[name] is None
        return f'a mapping (a reference is written in quotes: "{{{name}}}")' if bare else "a mapping"
    if isinstance(value, list | tuple):
        return "a list"
    text = value if isinstance(value, str) else str(value)
    return f"'{text[:60]}...'" if len(text) > 63 else f"'{text}'"


def _words(context: Mapping[str, Any]) -> list[str]:
    expected = str(context.get("expected", context.get("expected_tags", "")))
    return [word.strip().strip("'") for word in expected.replace(" or ", ", ").split(",")]


def _one_of(value: Any, context: Mapping[str, Any]) -> str:
    words = _words(context)
    near = nearest(str(context.get("tag", value)), words)
    given = shown(context.get("tag", value))
    return f"{given} is not known here; expected: {', '.join(words)}.{' ' if near else ''}{near}"


def _a_text(value: Any, _context: Mapping[str, Any]) -> str:
    if isinstance(value, int | float):
        return f"{shown(value)} is a number or a switch, and a text is expected here: put it into quotes"
    return f"a text is expected here, not {shown(value)}"


def _expected(what: str) -> Callable[[Any, Mapping[str, Any]], str]:
    return lambda value, _context: f"{what} is expected here, not {shown(value)}"


def _bound(words: str, key: str) -> Callable[[Any, Mapping[str, Any]], str]:
    return lambda value, context: f"{shown(value)} must be {words} {context[key]:g}"


def _length(words: str, key: str) -> Callable[[Any, Mapping[str, Any]], str]:
    return lambda value, context: f"this holds {len(value)} values; {words} {context[key]} are expected"


_MAPPING = _expected("a mapping (key: value)")
_LIST = _expected("a list")
_SAID: Mapping[str, Callable[[Any, Mapping[str, Any]], str]] = {
    "literal_error": _one_of,
    "union_tag_invalid": _one_of,
    "union_tag_not_found": lambda _value, context: f"{context['discriminator']} is missing here",
    "string_type": _a_text,
    "string_pattern_mismatch": lambda value, _context: f"{shown(value)} is not of the form that is expected here",
    "string_too_short": lambda _value, _context: "a text is expected here, not an empty one",
    "string_too_long": lambda _value, context: f"this text is longer than {context['max_length']} characters",
    "dict_type": _MAPPING,
    "model_type": _MAPPING,
    "model_attributes_type": _MAPPING,
    "mapping_type": _MAPPING,
    "list_type": _LIST,
    "tuple_type": _LIST,
    "bool_type": _expected("true or false"),
    "bool_parsing": _expected("true or false"),
    "greater_than": _bound("above", "gt"),
    "greater_than_equal": _bound("at least", "ge"),
    "less_than": _bound("below", "lt"),
    "less_than_equal": _bound("at most", "le"),
    "too_short": _length("at least", "min_length"),
    "too_long": _length("at most", "max_length"),
}
