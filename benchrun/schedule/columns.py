"""Conditions of many readings at once, as arrays: what the level check goes through.

The same way as in `walk`, for a whole array of readings of one place: each list around is gone through up to the reading; of a sweep
that is over its last round, of a sweep that it lies in the round before. A step is expanded once for each different combination of
the conditions that it looks at, which are few: a set that follows the frequency has as many as there are frequencies.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass, field

import numpy as np
import numpy.typing as npt

from benchrun.contract.actions import Action, AskAction, ProcedureAction, ReadAction, SetAction, SettleAction
from benchrun.contract.capture import FloatArray
from benchrun.contract.kinds import Settable
from benchrun.recipe.axis import Evenly
from benchrun.schedule.drive import DRIVE, Driver
from benchrun.schedule.program import Node, ReadSite, Site, StepNode, SweepNode
from benchrun.schedule.scope import Scope, in_range
from benchrun.schedule.state import CONNECTED

Codes = npt.NDArray[np.intp]
Rows = npt.NDArray[np.bool_] | None

#: Expansions remembered at most.
MOST_REMEMBERED = 1 << 15


#: Name under which the signals that are on are kept among the words, separated by spaces.
ON = "on."


@dataclass(frozen=True, slots=True)
class Columns:
    """Conditions of N readings of one place, or at N moments on the way to them: full names to values (N,) in SI.

    NaN where a value is not in force. `words` are codes (N,) into `vocabulary`, -1 for none: "connected.output". `index` is the
    reading's index. `read` is None for moments; then `words[ON]` says which signals are on.
    """

    read: ReadSite | None
    index: Codes
    values: Mapping[str, FloatArray]
    words: Mapping[str, Codes]
    vocabulary: Sequence[str]

    def signal_on(self, name: str) -> npt.NDArray[np.bool_]:
        """Return where (N,) a signal is on."""
        if self.read is not None:
            return np.full(len(self.index), name in self.read.signals)
        on = np.array([name in word.split() for word in self.vocabulary] + [False])
        return np.asarray(on[self.words[ON]] if ON in self.words else np.zeros(len(self.index), dtype=np.bool_))

    def row(self, n: int) -> tuple[dict[str, float], dict[str, str]]:
        """Return values and words of one row, those in force."""
        numbers = {name: float(column[n]) for name, column in self.values.items() if not np.isnan(column[n])}
        return numbers, {name: self.vocabulary[c[n]] for name, c in self.words.items() if c[n] >= 0 and name != ON}


@dataclass(slots=True)
class _Block:
    """The state of N readings while it is being worked out."""

    rows: int
    values: dict[str, FloatArray] = field(default_factory=dict)
    words: dict[str, Codes] = field(default_factory=dict)

    def put(self, name: str, value: FloatArray, rows: Rows) -> None:
        before = self.values.get(name)
        if rows is not None:
            value = np.where(rows, value, np.nan if before is None else before)
        self.values[name] = value

    def word(self, name: str, code: Codes, rows: Rows) -> None:
        before = self.words.get(name)
        if rows is not None:
            code = np.where(rows, code, -1 if before is None else before)
        self.words[name] = code

    def forget(self, names: frozenset[str], rows: Rows) -> None:
        for name in names & self.values.keys():
            self.put(name, np.full(self.rows, np.nan), rows)

    def row(self, n: int, vocabulary: Sequence[str]) -> tuple[dict[str, float], dict[str, str]]:
        """Return the conditions of one row, those in force."""
        numbers = {name: float(column[n]) for name, column in self.values.items() if not np.isnan(column[n])}
        return numbers, {name: vocabulary[column[n]] for name, column in self.words.items() if column[n] >= 0}


class Table:
    """Works out columns. `watch`, where it is set, is called at every set on the way, with the state and the rows it is for."""

    def __init__(
        self, driver: Driver | None, bias: frozenset[str], scope: Scope, settables: Mapping[str, Settable]
    ) -> None:
        self.vocabulary: list[str] = []
        self.watch: Callable[[_Block, Rows], None] | None = None
        self._codes: dict[str, int] = {}
        self._driver, self._bias, self._scope, self._settables = driver, bias, scope, settables
        self._remembered: dict[tuple[int, tuple[float, ...]], tuple[Action, ...]] = {}

    def columns(self, site: Site, rounds: Sequence[Codes]) -> Columns:
        """Return the conditions of the readings of a place at arrays (N,) of rounds, one array for each sweep around it."""
        block = self._at(site, rounds)
        return Columns(site.read, index_of(site, rounds), block.values, block.words, self.vocabulary)

    def _at(self, site: Site, rounds: Sequence[Codes]) -> _Block:
        block = _Block(len(rounds[0]) if rounds else 1)
        depth = 0
        for body, position in zip(site.lists, site.positions, strict=True):
            for node in body[:position]:
                self._whole(node, block, None)
            node = body[position]
            if isinstance(node, SweepNode):
                self._enter(node, rounds[depth], block)
                depth += 1
            else:
                self._step(node, block, None, before_reading=site.nth)
        return block

    def end(self, body: Sequence[Node]) -> None:
        """Go through a program to its end."""
        block = _Block(1)
        for node in body:
            self._whole(node, block, None)

    def code(self, word: str) -> int:
        """Return the code of a word."""
        if word not in self._codes:
            self._codes[word] = len(self.vocabulary)
            self.vocabulary.append(word)
        return self._codes[word]

    def _enter(self, node: SweepNode, rounds: Codes, block: _Block) -> None:
        later = rounds > 0
        if np.any(later):
            self._round(node, np.maximum(rounds - 1, 0), block, None if np.all(later) else later)
        self._begin(node, rounds, block, None)

    def _whole(self, node: Node, block: _Block, rows: Rows) -> None:
        if isinstance(node, StepNode):
            self._step(node, block, rows)
            return
        self._round(node, np.full(block.rows, len(node.axis) - 1, dtype=np.intp), block, rows)
        if not node.axis.settable:
            block.values.pop(node.axis.name, None)
            block.words.pop(node.axis.name, None)

    def _round(self, node: SweepNode, rounds: Codes, block: _Block, rows: Rows) -> None:
        self._begin(node, rounds, block, rows)
        for inner in node.body:
            self._whole(inner, block, rows)

    def _begin(self, node: SweepNode, rounds: Codes, block: _Block, rows: Rows) -> None:
        axis = node.axis
        if axis.kind == "text":
            codes = np.array([self.code(str(word)) for word in axis.values], dtype=np.intp)
            block.word(axis.name, codes[rounds], rows)
        elif axis.settable:
            self._set((axis.name,), (_taken(node, rounds),), block, rows)
        else:
            block.put(axis.name, _taken(node, rounds), rows)

    # Steps

    def _step(self, node: StepNode, block: _Block, rows: Rows, before_reading: int | None = None) -> None:
        if not (node.changes or node.unbiases):
            self._only_signals(node, block, rows, before_reading)
            return
        expansions, which = self._expansions(node, block, rows)
        for position, action in enumerate(expansions[0]):
            if isinstance(action, ReadAction):
                if before_reading == 0:
                    return
                before_reading = None if before_reading is None else before_reading - 1
            self._effect(action, [expansion[position] for expansion in expansions], which, block, rows)

    def _only_signals(self, node: StepNode, block: _Block, rows: Rows, before_reading: int | None) -> None:
        """A step that changes no condition leaves RF on as its last reading, or as the one that it waits for, has it."""
        reads = node.reads if before_reading is None else node.reads[:before_reading]
        if reads or (before_reading is None and node.following):
            self._on(reads[-1].signals if reads else node.following, block, rows)

    def _on(self, signals: Sequence[str], block: _Block, rows: Rows) -> None:
        block.word(ON, np.full(block.rows, self.code(" ".join(signals)), dtype=np.intp), rows)

    def _effect(self, action: Action, all_: Sequence[Action], which: Codes, block: _Block, rows: Rows) -> None:
        if isinstance(action, SetAction):
            names = tuple(name for name, _ in action.values)
            table = np.array([[value for _, value in one.values] for one in all_ if isinstance(one, SetAction)])
            self._set(names, tuple(table[which].T), block, rows)
        elif isinstance(action, ReadAction | SettleAction):
            self._on(action.signals, block, rows)
        elif isinstance(action, AskAction | ProcedureAction):
            block.forget(self._bias, rows)
            self._on((), block, rows)
        if isinstance(action, AskAction) and action.connect is not None:
            codes = [self.code(one.connect[1]) for one in all_ if isinstance(one, AskAction) and one.connect]
            block.word(CONNECTED + action.connect[0], np.array(codes, dtype=np.intp)[which], rows)

    def _set(self, names: Sequence[str], columns: Sequence[FloatArray], block: _Block, rows: Rows) -> None:
        for name, column in zip(names, columns, strict=True):
            self._check_range(name, column, rows)
            block.put(name, column, rows)
            if self._driver is not None:
                self._follow_drive(self._driver, name, block, rows)
            if self.watch is not None:
                self.watch(block, rows)

    def _check_range(self, name: str, column: FloatArray, rows: Rows) -> None:
        settable, there = self._settables.get(name), column if rows is None else column[rows]
        if settable is not None:
            for extreme in (np.min(there), np.max(there)):
                in_range(float(extreme), settable)

    def _follow_drive(self, driver: Driver, name: str, block: _Block, rows: Rows) -> None:
        if name == driver.level:
            block.forget(frozenset({DRIVE}), rows)
        elif name in (DRIVE, driver.frequency) and DRIVE in block.values and driver.frequency in block.values:
            self._level(driver, block, rows)

    @staticmethod
    def _level(driver: Driver, block: _Block, rows: Rows) -> None:
        drive, frequency = block.values[DRIVE], block.values[driver.frequency]
        there = np.isfinite(drive) & np.isfinite(frequency) & (True if rows is None else rows)
        if not np.any(there):
            return
        pairs, which = np.unique(drive[there] + 1j * frequency[there], return_inverse=True)
        level = np.full(block.rows, np.nan)
        level[there] = driver.levels_dbm(pairs.real.copy(), pairs.imag.copy())[which]
        block.put(driver.level, level, there)

    def _expansions(self, node: StepNode, block: _Block, rows: Rows) -> tuple[list[tuple[Action, ...]], Codes]:
        """Return the different expansions of a step over the rows, and for each row which of them is its."""
        there = np.arange(block.rows) if rows is None else np.flatnonzero(rows)
        which = np.zeros(block.rows, dtype=np.intp)
        while True:
            names = sorted(name for name in node.uses if name in block.values or name in block.words)
            looked_at = [block.words[n] if n in block.words else block.values[n] for n in names]
            first, which[there] = _different([column[there] for column in looked_at], len(there))
            found = [self._expansion(node, names, block, int(there[row])) for row in first]
            if node.uses <= frozenset(names) | self._absent(node, block):
                return found, which

    @staticmethod
    def _absent(node: StepNode, block: _Block) -> frozenset[str]:
        return frozenset(name for name in node.uses if name not in block.values and name not in block.words)

    def _expansion(self, node: StepNode, names: Sequence[str], block: _Block, row: int) -> tuple[Action, ...]:
        key = id(node), tuple(float(block.words[n][row] if n in block.words else block.values[n][row]) for n in names)
        known = self._remembered.get(key)
        if known is None:
            if len(self._remembered) > MOST_REMEMBERED:
                self._remembered.clear()
            numbers, words = block.row(row, self.vocabulary)
            self._scope.stand(numbers, words)
            self._scope.begin(node.following)
            known = self._remembered[key] = tuple(node.spec.expand(node.model, self._scope))
            node.uses |= self._scope.noted
        return known


class Moments:
    """What is in force on the way from one reading to the next, after each single set, while a signal is on."""

    def __init__(self, table: Table) -> None:
        self._table = table
        self._seen: list[tuple[_Block, Rows]] = []

    def on_the_way(self, site: Site, rounds: Sequence[Codes]) -> Iterator[Columns]:
        """Yield the moments on the way to the readings of a place."""
        self._table.watch = self._keep
        self._table.columns(site, rounds)
        yield from self._columns(index_of(site, rounds))

    def at_the_end(self, body: Sequence[Node], index: int) -> Iterator[Columns]:
        """Yield the moments on the way to the end."""
        self._table.watch = self._keep
        self._table.end(body)
        yield from self._columns(np.array([index], dtype=np.intp))

    def _keep(self, block: _Block, rows: Rows) -> None:
        if ON in block.words:
            self._seen.append((_Block(block.rows, dict(block.values), dict(block.words)), rows))

    def _columns(self, index: Codes) -> Iterator[Columns]:
        seen, self._seen = self._seen, []
        for block, rows in seen:
            kept = slice(None) if rows is None else rows
            values = {name: column[kept] for name, column in block.values.items()}
            words = {name: column[kept] for name, column in block.words.items()}
            yield Columns(None, index[kept], values, words, self._table.vocabulary)


def _taken(node: SweepNode, rounds: Codes) -> FloatArray:
    """Return the values of a sweep at rounds (N,), the same floats as one by one."""
    values = node.axis.values
    if isinstance(values, Evenly):
        if values.count == 1:
            return np.full(len(rounds), values.stop)
        found = values.start + (values.stop - values.start) * rounds / (values.count - 1)
        return np.asarray(np.where(rounds == values.count - 1, values.stop, found))
    return np.asarray(values, dtype=np.float64)[rounds]


def _different(columns: Sequence[npt.NDArray[np.generic]], rows: int) -> tuple[Codes, Codes]:
    """Return the first row of each different combination, and for each row which combination it has."""
    code = np.zeros(rows, dtype=np.int64)
    for column in columns:
        _, inverse = np.unique(column, return_inverse=True)
        _, code = np.unique(code * (int(inverse.max()) + 1) + inverse, return_inverse=True)
    _, first, which = np.unique(code, return_index=True, return_inverse=True)
    return first, which


def rounds_of(site: Site, start: int, stop: int) -> tuple[Codes, ...]:
    """Return the rounds of each sweep around a place, outermost first, for the start-th to the stop-th time it is reached."""
    shape = tuple(len(sweep.axis) for sweep in site.sweeps)
    return tuple(np.unravel_index(np.arange(start, stop), shape)) if shape else ()


def index_of(site: Site, rounds: Sequence[Codes]) -> Codes:
    """Return the indices of the readings of a place at these rounds."""
    index = np.full(len(rounds[0]) if rounds else 1, site.offset, dtype=np.intp)
    for stride, number in zip(site.strides, rounds, strict=True):
        index = index + stride * number
    return index


def times(site: Site) -> int:
    """Return how often a place is reached."""
    count = 1
    for sweep in site.sweeps:
        count *= len(sweep.axis)
    return count


def blocks(site: Site, chunk: int) -> Iterator[tuple[Codes, ...]]:
    """Yield the rounds of a place, at most `chunk` times at once."""
    total = times(site)
    for start in range(0, total, chunk):
        yield rounds_of(site, start, min(start + chunk, total))
