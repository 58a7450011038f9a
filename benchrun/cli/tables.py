"""Plain tables: aligned columns, no boxes, as narrow as the terminal asks for."""

from __future__ import annotations

import sys
import textwrap
from collections.abc import Sequence

GAP = 2
INDENT = 4
NARROWEST_TEXT = 16
TALLEST_HEADING = 3


def table(
    headings: Sequence[str], rows: Sequence[Sequence[str]], *, right: Sequence[int] = (), width: int | None = None
) -> list[str]:
    """Return the lines of a table; columns whose positions are in `right` are aligned to the right.

    Where the table is wider than `width`, headings are folded first, then the last column, which goes below its row
    where nothing is left for it. No figure is ever cut: what still does not fit runs over the edge.
    """
    if not rows:
        return []
    width = width or sys.maxsize
    widths = _widths(headings, [max(len(row[k]) for row in rows) for k in range(len(headings))], width)
    spare = width - _total([*widths[:-1], 0])
    lay = _below if spare < min(widths[-1], NARROWEST_TEXT) else _beside
    widths[-1] = min(widths[-1], spare if lay is _beside else width - INDENT)
    return lay(headings, widths, right, bottom=True) + [
        line for row in rows for line in lay(row, widths, right, bottom=False)
    ]


def _widths(headings: Sequence[str], bodies: Sequence[int], width: int) -> list[int]:
    """Return the columns' widths with headings folded into as few lines as fit."""
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


def _below(cells: Sequence[str], widths: Sequence[int], right: Sequence[int], *, bottom: bool) -> list[str]:
    """Lay the cells side by side, the last one on lines of its own."""
    last = _fold(cells[-1], widths[-1]) if cells[-1] else []
    return _beside(cells[:-1], widths[:-1], right, bottom=bottom) + [" " * INDENT + piece for piece in last]


def _beside(cells: Sequence[str], widths: Sequence[int], right: Sequence[int], *, bottom: bool) -> list[str]:
    """Fold each cell to its column and lay the pieces side by side; headings stand on the bottom line."""
    folded = [_fold(cell, width) for cell, width in zip(cells, widths, strict=True)]
    height = max((len(pieces) for pieces in folded), default=0)
    for pieces in folded:
        padding = [""] * (height - len(pieces))
        pieces[:] = padding + pieces if bottom else pieces + padding
    return [_line(pieces, widths, right) for pieces in zip(*folded, strict=True)]


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
