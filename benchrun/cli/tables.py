"""Plain tables: aligned columns, no boxes, as narrow as the terminal asks for."""

from __future__ import annotations

import re
import sys
import textwrap
from collections.abc import Iterable, Sequence
from itertools import accumulate

GAP = 2
INDENT = 4
NARROWEST_TEXT = 16
TALLEST_HEADING = 3
_WITH_UNIT = re.compile(r"(.*\d) ([A-Za-z%/]+)")
_NOTHING = {"", "-", "none"}


def table(
    headings: Sequence[str], rows: Sequence[Sequence[str]], *, right: Sequence[int] = (), width: int | None = None
) -> list[str]:
    """Return the lines of a table; columns whose positions are in `right` are aligned to the right.

    Where the table is wider than `width`: headings are folded, then the last column; common units move into the
    headings where that helps; what still does not fit beside goes below its row. No figure is ever cut.
    """
    if not rows:
        return []
    width = width or sys.maxsize
    widths, beside = _layout(headings, rows, width)
    if beside < len(headings):
        shorter_headings, *shorter_rows = _units_in_headings(headings, rows)
        shorter_widths, more = _layout(shorter_headings, shorter_rows, width)
        if more > beside:
            headings, rows, widths, beside = shorter_headings, shorter_rows, shorter_widths, more
    return [
        line
        for number, cells in enumerate([headings, *rows])
        for line in (
            *_beside(cells[:beside], widths[:beside], right, bottom=number == 0),
            *_below(cells[beside:], width),
        )
    ]


def _layout(headings: Sequence[str], rows: Sequence[Sequence[str]], width: int) -> tuple[list[int], int]:
    """Return the columns' widths, and how many columns stand beside each other."""
    widths = _widths(headings, rows, width)
    spare = width - _total([*widths[:-1], 0])
    if spare >= min(widths[-1], NARROWEST_TEXT):
        return [*widths[:-1], min(widths[-1], spare)], len(widths)
    ends = accumulate(widths, lambda end, own: end + GAP + own)
    return widths, max(1, sum(end <= width for end in ends))


def _widths(headings: Sequence[str], rows: Sequence[Sequence[str]], width: int) -> list[int]:
    """Return the columns' widths with headings folded into as few lines as fit."""
    bodies = [max(map(len, column)) for column in zip(*rows, strict=True)]
    for height in range(1, TALLEST_HEADING + 1):
        widths = [max(body, _narrowest(heading, height)) for body, heading in zip(bodies, headings, strict=True)]
        if _total(widths) <= width:
            break
    return widths


def _narrowest(heading: str, height: int) -> int:
    """Return the least width at which `heading` folds into at most `height` lines."""
    folds = ((width, _fold(heading, width)) for width in range(len(heading) + 1))
    return next(width for width, pieces in folds if len(pieces) <= height and max(map(len, pieces)) <= width)


def _total(widths: Sequence[int]) -> int:
    return sum(widths) + GAP * max(len(widths) - 1, 0)


def _units_in_headings(headings: Sequence[str], rows: Sequence[Sequence[str]]) -> list[Sequence[str]]:
    """Return headings and rows with the unit that a whole column shares said once, in its heading."""
    columns = [_said_once(column) for column in zip(headings, *rows, strict=True)]
    return list(zip(*columns, strict=True))


def _said_once(column: Sequence[str]) -> Sequence[str]:
    heading, *cells = column
    found = [_WITH_UNIT.fullmatch(cell) for cell in cells if cell not in _NOTHING]
    units = {match[2] if match else "" for match in found}
    if len(units) != 1 or "" in units:
        return column
    (unit,) = units
    return [f"{heading}, {unit}" if heading else unit, *(cell.removesuffix(f" {unit}") for cell in cells)]


def _beside(cells: Sequence[str], widths: Sequence[int], right: Sequence[int], *, bottom: bool) -> list[str]:
    """Fold each cell to its column and lay the pieces side by side; headings stand on the bottom line."""
    folded = [_fold(cell, width) for cell, width in zip(cells, widths, strict=True)]
    height = max(len(pieces) for pieces in folded)
    for pieces in folded:
        padding = [""] * (height - len(pieces))
        pieces[:] = padding + pieces if bottom else pieces + padding
    return [_line(pieces, widths, right) for pieces in zip(*folded, strict=True)]


def _below(cells: Iterable[str], width: int) -> list[str]:
    """Fold the cells that found no place beside, one after the other, on indented lines."""
    text = (" " * GAP).join(cell for cell in cells if cell)
    return [" " * INDENT + piece for piece in _fold(text, width - INDENT)] if text else []


def _line(pieces: Sequence[str], widths: Sequence[int], right: Sequence[int]) -> str:
    padded = [
        piece.rjust(width) if k in right else piece.ljust(width)
        for k, (piece, width) in enumerate(zip(pieces, widths, strict=True))
    ]
    return (" " * GAP).join(padded).rstrip()


def _fold(cell: str, width: int) -> list[str]:
    """Fold a cell between words; one that fits, or is empty, stays as it is."""
    if len(cell) <= width:
        return [cell]
    return textwrap.wrap(cell, max(width, 1), break_long_words=False, break_on_hyphens=False) or [""]
