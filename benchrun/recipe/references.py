"""References: "{frequency} - 7 MHz" is a sum of references and quantities. Nothing else is ever evaluated.

A sum is terms with " + " or " - " between them, with spaces around the sign, so that "-7 MHz" and "1e-3 s" are one term
each. The terms of a level are one level and then ratios in dB; those of a temperature one temperature and then
differences in K.
"""

from __future__ import annotations

import re
from collections.abc import Mapping
from dataclasses import dataclass

from benchrun.contract.kinds import Kind
from benchrun.errors import InputError, QuantityError
from benchrun.quantities import parse

NAME = r"[A-Za-z0-9][A-Za-z0-9_-]*(?:\.[A-Za-z][A-Za-z0-9-]*)?"
_REFERENCE = re.compile(rf"\{{({NAME})\}}")
_SIGN = re.compile(r"\s+([+-])\s+")
#: What may be added to a quantity of a kind, where that is another kind.
DIFFERENCE: Mapping[Kind, Kind] = {"level": "ratio", "temperature": "temperature-difference"}


@dataclass(frozen=True, slots=True)
class Term:
    """One term of a sum: a reference, or the text of a quantity."""

    sign: float
    reference: str | None
    text: str


@dataclass(frozen=True, slots=True)
class Sum:
    """A parsed sum."""

    terms: tuple[Term, ...]

    @property
    def references(self) -> tuple[str, ...]:
        """Names that the sum refers to."""
        return tuple(term.reference for term in self.terms if term.reference is not None)

    def fits(self, reference: str, kind: Kind, target: Kind) -> bool:
        """Whether a reference of one kind may stand where it does in a sum for a target of another."""
        places = [position for position, term in enumerate(self.terms) if term.reference == reference]
        return all(kind == (DIFFERENCE.get(target, target) if position else target) for position in places)

    def evaluate(self, values: Mapping[str, float], kind: Kind) -> float:
        """Return the sum (SI). Raises InputError for a reference without a value, QuantityError for another kind."""
        return sum(term.sign * _value(term, position, values, kind) for position, term in enumerate(self.terms))


def _value(term: Term, position: int, values: Mapping[str, float], kind: Kind) -> float:
    if term.reference is None:
        return parse(term.text, DIFFERENCE.get(kind, kind) if position else kind)
    if term.reference not in values:
        known = ", ".join(sorted(values)) or "nothing"
        raise InputError(f"'{{{term.reference}}}' has no value here. What has one: {known}.")
    return values[term.reference]


def parse_sum(text: str) -> Sum:
    """Read a sum. Raises QuantityError for a stray brace or an empty term; quantities are read by evaluate()."""
    pieces = _SIGN.split(text.strip())
    signs = ["+", *pieces[1::2]]
    return Sum(tuple(_term(sign, piece.strip(), text) for sign, piece in zip(signs, pieces[0::2], strict=True)))


def _term(sign: str, piece: str, text: str) -> Term:
    factor = -1.0 if sign == "-" else 1.0
    match = _REFERENCE.fullmatch(piece)
    if match:
        return Term(factor, match[1], piece)
    if not piece or "{" in piece or "}" in piece:
        raise QuantityError(f"'{text}' is not a sum of references and quantities, such as '{{frequency}} - 7 MHz'")
    return Term(factor, None, piece)


def references_in(text: str) -> tuple[str, ...]:
    """Return the names that a text refers to as {name}, in order."""
    return tuple(_REFERENCE.findall(text))


def substitute(text: str, words: Mapping[str, str]) -> str:
    """Replace {name} by the word it stands for. Raises InputError for a name without one."""

    def word(match: re.Match[str]) -> str:
        if match[1] not in words:
            raise InputError(
                f"'{{{match[1]}}}' stands for no word here. What does: {', '.join(sorted(words)) or 'nothing'}."
            )
        return words[match[1]]

    return _REFERENCE.sub(word, text)
