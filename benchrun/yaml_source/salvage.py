"""What of a file is sound although other things in it are not: so that one mistake hides no other."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any, TypeVar

from pydantic import BaseModel, ValidationError

from benchrun.errors import Problem
from benchrun.yaml_source.places import Source

Model = TypeVar("Model", bound=BaseModel)
#: Leaving out what is wrong may leave something else wanting; after this often nothing is sound enough to go on with.
ROUNDS = 4


def salvage(
    source: Source, model: type[Model], context: Mapping[str, Any] | None = None
) -> tuple[Model | None, frozenset[str]]:
    """Return a model of what is sound in a file, None where too little is, and the names that were left out.

    Of a mapping of named things each that has a mistake is left out whole, of others the key with the mistake. Where a
    whole part of the file is missing or misspelt too little is sound.
    """
    data, left_out = _plain(source.data), set[str]()
    for _ in range(ROUNDS):
        try:
            return model.model_validate(data, context=dict(context or {})), frozenset(left_out)
        except ValidationError as error:
            spared = [_leave_out(data, detail["loc"], left_out) for detail in error.errors(include_url=False)]
            if not all(spared):
                break
    return None, frozenset(left_out)


def apart_from(problems: list[Problem], left_out: frozenset[str]) -> list[Problem]:
    """Return the problems that do not come from names having been left out."""
    return [problem for problem in problems if not any(f"'{name}'" in problem.message for name in left_out)]


def _plain(value: Any) -> Any:
    if isinstance(value, Mapping):
        return {key: _plain(item) for key, item in value.items()}
    return [_plain(item) for item in value] if isinstance(value, list) else value


def _leave_out(data: Any, path: tuple[int | str, ...], left_out: set[str]) -> bool:
    """Take out the named thing, or the key, that a mistake stands in; a whole part of the file cannot be spared."""
    within = data.get(path[0]) if isinstance(data, dict) and len(path) > 1 else None
    if not isinstance(within, dict) or (name := str(path[1])) not in {*within, *left_out}:
        return False
    within.pop(name, None)
    left_out.add(name)
    return True
