"""Plain tables: aligned columns, no boxes, as narrow as the terminal asks for."""

from __future__ import annotations

import textwrap
from collections.abc import Sequence

GAP = 2
NARROWEST_TEXT = 16


def table(
    headings: Sequence[str], rows: Sequence[Sequence[str]], *, right: Sequence[int] = (), width: int | None = None
) -> list[str]:
    """Return the lines of a table; columns whose positions are in `right` are aligned to the right.

    Where the table is wider than `width`, headings are folded first, then the last column. No figure is ever cut: what
    still does not fit runs over the edge.
    """
    if not rows:
        return []
    bodies = [max(len(row[k]) for row in rows) for k in range(len(headings))]
    widths = [max(body, len(heading)) for body, heading in zip(bodies, headings, strict=True)]
    if width is not None and _total(widths) > width:
        words = [max((len(word) for word in heading.split()), default=0) for heading in headings]
        widths = [max(body, word) for body, word in zip(bodies, words, strict=True)]
        spare = width - _total(widths[:-1]) - GAP
        if len(widths) > 1 and widths[-1] > spare:
            widths[-1] = max(spare, NARROWEST_TEXT)
        widths = _give_back(widths, [len(heading) for heading in headings], width)
    return _lines(headings, widths, right, bottom=True) + [
        line for row in rows for line in _lines(row, widths, right, bottom=False)
    ]


def _total(widths: Sequence[int]) -> int:
    return sum(widths) + GAP * max(len(widths) - 1, 0)


def _give_back(widths: list[int], wanted: Sequence[int], width: int) -> list[int]:
    """Widen the columns with folded headings, from the left, as far as room is left over."""
    room = width - _total(widths)
    for k, want in enumerate(wanted):
        if 0 < want - widths[k] <= room:
            room -= want - widths[k]
            widths[k] = want
    return widths


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
    if len(cell) <= width:
        return [cell]
    return textwrap.wrap(cell, max(width, 1), break_long_words=False, break_on_hyphens=False) or [""]
