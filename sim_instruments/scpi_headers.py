"""Command headers: long and short forms, optional nodes, numeric suffixes (SCPI-1999 volume 1 section 6.2).

A header is declared as the standard prints it: "[SOURce<n>:]POWer[:LEVel][:IMMediate][:AMPLitude]". Capitals are
the short form, brackets are optional, <n> takes a numeric suffix (1 where it is left out), | separates synonyms. A node
without <n> exists once, and so may be called number 1 (6.2.5.2).
"""

from __future__ import annotations

import re
from collections.abc import Iterable
from typing import Generic, Protocol, TypeVar

from .scpi_errors import ScpiError

_PIECE = re.compile(r"\[|\]|:|\*?[A-Za-z][A-Za-z0-9_]*(?:<n>)?(?:\|[A-Za-z][A-Za-z0-9_]*(?:<n>)?)*")
_LONGEST_MNEMONIC = 12
_CACHE_LIMIT = 4096


class Declared(Protocol):
    """Anything with a header: what a table holds."""

    @property
    def header(self) -> str:
        """Header as the standard prints it."""

    @property
    def suffix_limits(self) -> tuple[int, ...]:
        """Largest numeric suffix of each <n>, in order."""


D = TypeVar("D", bound=Declared)


def short_form(word: str) -> str:
    """Return a mnemonic's short form: four letters, or three where the fourth is a vowel (SCPI-1999 vol. 1 6.2.1)."""
    if len(word) <= 4:
        return word.upper()
    return word[:3].upper() if word[3].upper() in "AEIOU" else word[:4].upper()


def declared_forms(mnemonic: str) -> tuple[str, str]:
    """Return (short, long) of a mnemonic declared with its short form in capitals."""
    return "".join(c for c in mnemonic if not c.islower()), mnemonic.upper()


def header_pattern(header: str, *, any_suffix: bool = False) -> re.Pattern[str]:
    """Compile a declared header; group k holds the digits of the k-th numeric suffix."""
    pieces = _PIECE.findall(header)
    assert "".join(pieces) == header, f"{header} is not a header"
    return re.compile("".join(_piece(piece, any_suffix) for piece in pieces), re.ASCII)


def _piece(piece: str, any_suffix: bool) -> str:
    if piece in "[]:":
        return {"[": "(?:", "]": ")?", ":": ":"}[piece]
    forms = [re.escape(form) for word in piece.split("|") for form in declared_forms(word.removesuffix("<n>"))]
    names = "(?:" + "|".join(dict.fromkeys(forms)) + ")"
    if piece.startswith("*"):
        return names
    if any_suffix:
        return names + r"\d*"
    return names + (r"(\d*)" if piece.endswith("<n>") else "1?")


class CommandTable(Generic[D]):
    """The headers that an instrument knows."""

    def __init__(self, commands: Iterable[D]) -> None:
        self.commands = tuple(commands)
        self._patterns = [(header_pattern(command.header), command) for command in self.commands]
        self._found: dict[str, tuple[D, tuple[int, ...]]] = {}

    def find(self, header: str) -> tuple[D, tuple[int, ...]]:
        """Return the command of a full header in upper case, and its numeric suffixes.

        Raises ScpiError -112, -113 or -114.
        """
        found = self._found.get(header)
        if found is None:
            found = self._search(header)
            if len(self._found) < _CACHE_LIMIT:  # spellings are many, and a client may send all of them
                self._found[header] = found
        return found

    def _search(self, header: str) -> tuple[D, tuple[int, ...]]:
        for pattern, command in self._patterns:
            match = pattern.fullmatch(header)
            if match is not None:
                return command, _suffixes(match.groups(), command.suffix_limits, header)
        raise ScpiError(self._why(header), header[:60])

    def _why(self, header: str) -> int:
        if any(len(mnemonic) > _LONGEST_MNEMONIC for mnemonic in header.lstrip("*").split(":")):
            return -112
        known = any(header_pattern(c.header, any_suffix=True).fullmatch(header) for c in self.commands)
        return -114 if known else -113


def _suffixes(digits: tuple[str | None, ...], limits: tuple[int, ...], header: str) -> tuple[int, ...]:
    suffixes = tuple(int(d) if d else 1 for d in digits)
    for suffix, limit in zip(suffixes, limits, strict=True):
        if not 1 <= suffix <= limit:
            raise ScpiError(-114, header[:60])
    return suffixes
