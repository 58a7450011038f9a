"""Conditions of many readings at once, as arrays, and which readings those are."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
import numpy.typing as npt

from benchrun.contract.capture import FloatArray
from benchrun.schedule.program import ReadSite, Site

Codes = npt.NDArray[np.intp]
#: Rows that something is for; None for all of them.
Rows = npt.NDArray[np.bool_] | None

#: Name under which the signals that are on are kept among the words, separated by spaces.
ON = "on."


@dataclass(frozen=True, slots=True)
class Columns:
    """Conditions of N readings of one place, or at N moments on the way to them: full names to values (N,) in SI.

    NaN where a value is not in force. `words` are codes (N,) into `vocabulary`, -1 for none: "connected.output".
    `index` is the reading's index. `read` is None for moments; then `words[ON]` says which signals are on. `swept`
    names what is swept around the place.
    """

    read: ReadSite | None
    index: Codes
    values: Mapping[str, FloatArray]
    words: Mapping[str, Codes]
    vocabulary: Sequence[str]
    swept: tuple[str, ...] = ()

    def signal_on(self, name: str) -> npt.NDArray[np.bool_]:
        """Return where (N,) a signal is on."""
        if self.read is not None:
            return np.full(len(self.index), name in self.read.signals)
        on = np.array([name in word.split() for word in self.vocabulary] + [False])
        return np.asarray(on[self.words[ON]] if ON in self.words else np.zeros(len(self.index), dtype=np.bool_))

    def row(self, n: int) -> tuple[dict[str, float], dict[str, str]]:
        """Return values and words of one row, those in force."""
        return in_force(self.values, self.words, self.vocabulary, n)


def in_force(
    values: Mapping[str, FloatArray], words: Mapping[str, Codes], vocabulary: Sequence[str], n: int
) -> tuple[dict[str, float], dict[str, str]]:
    """Return values and words of row n, those in force."""
    numbers = {name: float(column[n]) for name, column in values.items() if not np.isnan(column[n])}
    return numbers, {name: vocabulary[codes[n]] for name, codes in words.items() if codes[n] >= 0 and name != ON}


@dataclass(slots=True)
class Block:
    """What is in force in N rows, while it is being worked out."""

    rows: int
    values: dict[str, FloatArray] = field(default_factory=dict)
    words: dict[str, Codes] = field(default_factory=dict)

    def put(self, name: str, value: FloatArray, rows: Rows) -> None:
        """Let a name have values (N,) in some rows."""
        if rows is not None:
            before = self.values.get(name)
            value = np.where(rows, value, np.nan if before is None else before)
        self.values[name] = value

    def word(self, name: str, code: Codes, rows: Rows) -> None:
        """Let a name stand for words (N,) in some rows."""
        if rows is not None:
            before = self.words.get(name)
            code = np.where(rows, code, -1 if before is None else before)
        self.words[name] = code

    def forget(self, names: frozenset[str], rows: Rows) -> None:
        """Let names have no value in some rows."""
        for name in names & self.values.keys():
            self.put(name, np.full(self.rows, np.nan), rows)

    def leave(self, name: str) -> None:
        """Forget a variable whose sweep is over."""
        self.values.pop(name, None)
        self.words.pop(name, None)

    def taken(self, rows: npt.NDArray[np.bool_]) -> Block:
        """Return some of the rows."""
        values = {name: column[rows] for name, column in self.values.items()}
        return Block(int(np.count_nonzero(rows)), values, {name: codes[rows] for name, codes in self.words.items()})


def index_of(site: Site, rounds: Sequence[Codes]) -> Codes:
    """Return the indices of the readings of a place at rounds (N,), one array for each sweep around it."""
    index = np.full(len(rounds[0]) if rounds else 1, site.offset, dtype=np.intp)
    for stride, number in zip(site.strides, rounds, strict=True):
        index = index + stride * number
    return index


def all_rounds(site: Site, chunk: int) -> Iterator[tuple[Codes, ...]]:
    """Yield the rounds at which a place is reached, in order, at most `chunk` at once."""
    shape = tuple(len(sweep.axis) for sweep in site.sweeps)
    total = math.prod(shape)
    for start in range(0, total, chunk):
        flat = np.arange(start, min(start + chunk, total))
        yield tuple(np.unravel_index(flat, shape)) if shape else ()


def begins(rounds: Sequence[Codes], depth: int) -> npt.NDArray[np.bool_]:
    """Return in which rows (N,) any of the `depth` outermost rounds begins: differs from the row before."""
    count = len(rounds[0]) if rounds else 1
    found = np.zeros(count, dtype=np.bool_)
    found[0] = True
    for number in rounds[:depth]:
        found[1:] |= np.diff(number) != 0
    return found
