"""Plain tables: aligned columns, no boxes, as narrow as the terminal asks for."""

from __future__ import annotations

import textwrap
from collections.abc import Sequence

GAP = 2
NARROWEST_TEXT = 16
TALLEST_HEADING = 3


def table(
    headings: Sequence[str], rows: Sequence[Sequence[str]], *, right: Sequence[int] = (), width: int | None = None
) -> list[str]:
    """Return the lines of a table; columns whose positions are in `right` are aligned to the right.

    Where the table is wider than `width`, headings are folded first, then the last column. No figure is ever cut: what
    still does not fit runs over the edge.
    """
    if not rows:
        return []
    widths = _widths(headings, [max(len(row[k]) for row in rows) for k in range(len(headings))], width)
    return _lines(headings, widths, right, bottom=True) + [
        line for row in rows for line in _lines(row, widths, right, bottom=False)
    ]


def _widths(headings: Sequence[str], bodies: Sequence[int], width: int | None) -> list[int]:
    """Return the columns' widths with headings folded into as few lines as fit."""
    for height in range(1, TALLEST_HEADING + 1):
        widths = [max(body, _narrowest(heading, height)) for body, heading in zip(bodies, headings, strict=True)]
        if width is None or _total(widths) <= width:
            return widths
    *others, _last = widths
    return [*others, min(widths[-1], max(width - _total([*others, 0]), NARROWEST_TEXT))]


def _narrowest(heading: str, height: int) -> int:
    """Return the least width at which `heading` folds into at most `height` lines."""
    folds = ((width, _fold(heading, width)) for width in range(len(heading) + 1))
    return next(width for width, pieces in folds if len(pieces) <= height and max(map(len, pieces)) <= width)


def _total(widths: Sequence[int]) -> int:
    return sum(widths) + GAP * max(len(widths) - 1, 0)


def _lines(cells: Sequence[str], widths: Sequence[int], right: Sequence[int], *, bottom: bool) -> list[str]:
    """Fold each cell to its column and lay the pieces side by side; headings stand on the bottom line."""
    folded = [_fold(cell, width) for cell, width in zip(cells, widths, strict=True)]
    height = max(len(pieces) for pieces in folded)
    for pieces in folded:
        padding = [""] * (height - len(pieces))
        pieces[:] = padding + pieces if bottom else pieces + padding
    return [
        (" " * GAP)
        .join(
            piece.rjust(width) if k in right else piece.ljust(width)
            for k, (piece, width) in enumerate(zip(line, widths, strict=True))
        )
        .rstrip()
        for line in zip(*folded, strict=True)
    ]


def _fold(cell: str, width: int) -> list[str]:
    """Fold a cell between words; one that fits, or is empty, stays as it is."""
    if len(cell) <= width:
        return [cell]
    return textwrap.wrap(cell, max(width, 1), break_long_words=False, break_on_hyphens=False) or [""]
