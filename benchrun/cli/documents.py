"""Documents that flow hands over (what a run holds, who answers) as text for a person: names, figures, tables."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TypeGuard

from benchrun.cli.figures import named_figure
from benchrun.cli.tables import table

Record = Mapping[str, object]


def document_lines(document: Record, width: int | None = None) -> list[str]:
    """Return a document as lines: single values beside their names, lists of records as tables below their name."""
    single = [named_figure(key, value) for key, value in document.items() if not _is_table(value)]
    names = max((len(name) for name, _ in single), default=0)
    lines = [f"{name:<{names}}  {text}" for name, text in single]
    for key, value in document.items():
        if _is_table(value):
            lines += ["", key.replace("_", " "), *("  " + line for line in record_lines(value, width and width - 2))]
    return lines


def record_lines(records: Sequence[Record], width: int | None = None) -> list[str]:
    """Return records as a table; its columns are the keys, in the order in which they first appear."""
    keys = list(dict.fromkeys(key for record in records for key in record))
    columns = [_column(key, [record.get(key) for record in records]) for key in keys]
    headings, *rows = zip(*columns, strict=True) if columns else [()]
    right = [k for k, key in enumerate(keys) if all(_is_number(record.get(key)) for record in records)]
    return table(headings, rows, right=right, width=width)


def _column(key: str, values: Sequence[object]) -> list[str]:
    """Return a heading and the cells below it."""
    named = [named_figure(key, value) for value in values]
    heading = next(
        (name for (name, _), value in zip(named, values, strict=True) if value not in (None, "")), named[0][0]
    )
    return [heading, *(text for _, text in named)]


def _is_number(value: object) -> bool:
    return value is None or (isinstance(value, int | float) and not isinstance(value, bool))


def _is_table(value: object) -> TypeGuard[Sequence[Record]]:
    return isinstance(value, list | tuple) and bool(value) and all(isinstance(item, Mapping) for item in value)
