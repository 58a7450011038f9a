"""A page taken apart by the standard library's own parser: tables, texts, links, scripts."""

from __future__ import annotations

import base64
import gzip
import json
from dataclasses import dataclass, field
from html.parser import HTMLParser
from typing import Any

MINUS, UNKNOWN = "\N{MINUS SIGN}", "\N{EN DASH}"


@dataclass
class ReadTable:
    """A table as a reader sees it: caption, headings, rows of cells."""

    caption: str = ""
    headings: list[str] = field(default_factory=list)
    rows: list[list[str]] = field(default_factory=list)

    def column(self, heading: str) -> list[str]:
        """Return the cells below a heading."""
        return [row[self.headings.index(heading)] for row in self.rows]

    def pairs(self) -> dict[str, str]:
        """Return a table of names and values."""
        return {row[0]: row[1] for row in self.rows}


class Page(HTMLParser):
    """A page: `tables` in order, all `texts` outside of scripts, `elements` with attributes, `scripts` by id."""

    def __init__(self, html: str) -> None:
        super().__init__(convert_charrefs=True)
        self.html = html
        self.tables: list[ReadTable] = []
        self.elements: list[tuple[str, dict[str, str | None]]] = []
        self.scripts: dict[str, str] = {}
        self.texts: list[str] = []
        self._open: list[ReadTable] = []
        self._cell: list[str] | None = None
        self._inside = ""
        self._script: str | None = None
        self.feed(html)
        self.close()

    @property
    def text(self) -> str:
        """Everything that a reader can read."""
        return " ".join(" ".join(self.texts).split())

    @property
    def charts(self) -> dict[str, Any]:
        """What the page's script draws."""
        found: dict[str, Any] = json.loads(self.scripts["charts"]) if "charts" in self.scripts else {}
        return found

    def unpacked(self) -> str:
        """Return the plotting script as the page unpacks it."""
        return gzip.decompress(base64.b64decode(self.scripts["plotting"], validate=True)).decode()

    def table(self, caption: str) -> ReadTable:
        """Return the one table whose caption begins like this."""
        (found,) = [table for table in self.tables if table.caption.startswith(caption)]
        return found

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        """Follow a start tag."""
        self.elements.append((tag, dict(attrs)))
        if tag in ("script", "style"):
            self._script = str(dict(attrs).get("id") or tag)
            self.scripts[self._script] = ""
        elif tag == "table":
            self.tables.append(ReadTable())
            self._open.append(self.tables[-1])
        elif tag in ("thead", "tbody", "caption"):
            self._inside = tag
        elif tag == "tr" and self._open and self._inside != "thead":
            self._open[-1].rows.append([])
        elif tag in ("th", "td") and self._open:
            self._cell = []
        elif tag == "span" and self._cell is not None:
            self._cell.append(", ")

    def handle_endtag(self, tag: str) -> None:
        """Follow an end tag."""
        if tag in ("script", "style"):
            self._script = None
        elif tag == "table":
            self._open.pop()
        elif tag in ("thead", "caption"):
            self._inside = ""
        elif tag in ("th", "td") and self._cell is not None and self._open:
            text = " ".join("".join(self._cell).split())
            (self._open[-1].headings if self._inside == "thead" else self._open[-1].rows[-1]).append(text)
            self._cell = None

    def handle_data(self, data: str) -> None:
        """Follow text."""
        if self._script is not None:
            self.scripts[self._script] += data
            return
        self.texts.append(data)
        if self._inside == "caption" and self._open:
            self._open[-1].caption += data
        if self._cell is not None:
            self._cell.append(data)


def number(cell: str) -> float:
    """Return a cell as a number; NaN for a dash."""
    return float("nan") if cell == UNKNOWN else float(cell.replace(MINUS, "-"))


def decimals(cell: str) -> int:
    """Return how many decimals a cell has."""
    return len(cell.partition(".")[2])


def same_to_the_printed_digit(cell: str, value: float) -> bool:
    """Whether a cell is what rounding `value` to the cell's own decimals gives."""
    if value != value:
        return cell == UNKNOWN
    return abs(number(cell) - value) <= 0.5 * 10.0 ** -decimals(cell) * (1 + 1e-9) + 1e-12 * abs(value)
