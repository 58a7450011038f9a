"""Documents that flow hands over (what a run holds, who answers) as text for a person: names, figures, tables."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TypeGuard

from benchrun.cli.tables import table

Record = Mapping[str, object]


def document_lines(document: Record, width: int | None = None) -> list[str]:
    """Return a document as lines: single values beside their names, lists of records as tables below their name."""
    single = {key: value for key, value in document.items() if not _is_table(value)}
    names = max((len(_name(key)) for key in single), default=0)
    lines = [f"{_name(key):<{names}}  {_cell(value)}".rstrip() for key, value in single.items()]
    for key, value in document.items():
        if _is_table(value):
            lines += ["", _name(key), *("  " + line for line in record_lines(value, width and width - 2))]
    return lines


def record_lines(records: Sequence[Record], width: int | None = None) -> list[str]:
    """Return records as a table; its columns are the keys, in the order in which they first appear."""
    keys = list(dict.fromkeys(key for record in records for key in record))
    rows = [[_cell(record.get(key)) for key in keys] for record in records]
    right = [k for k, key in enumerate(keys) if all(_is_number(record.get(key)) for record in records)]
    return table([_name(key) for key in keys], rows, right=right, width=width)


def _name(key: str) -> str:
    return key.replace("_", " ")


def _cell(value: object) -> str:
    """Return one value as text; what is not known is a hyphen."""
    match value:
        case None | "":
            return "-"
        case bool():
            return "yes" if value else "no"
        case float():
            return f"{value:.6g}"
        case Mapping():
            return ", ".join(f"{_name(str(key))} {_cell(item)}" for key, item in value.items()) or "-"
        case list() | tuple() | set() | frozenset():
            return ", ".join(_cell(item) for item in value) or "-"
        case _:
            return str(value)


def _is_number(value: object) -> bool:
    return value is None or (isinstance(value, int | float) and not isinstance(value, bool))


def _is_table(value: object) -> TypeGuard[Sequence[Record]]:
    return isinstance(value, list | tuple) and bool(value) and all(isinstance(item, Mapping) for item in value)
