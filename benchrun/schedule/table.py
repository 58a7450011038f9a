"""Working out the conditions of many readings at once: what the level check goes through.

The same way as in `walk`, for an array of readings of one place: each list around is gone through up to the reading;
of a sweep that is over its last round, of a sweep that it lies in the round before. A step is expanded once for each
different combination of the conditions that it looks at, which are few: a set that follows the frequency has as many
as there are frequencies.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence

import numpy as np
import numpy.typing as npt

from benchrun.contract.actions import Action, AskAction, ProcedureAction, ReadAction, SetAction, SettleAction
from benchrun.contract.capture import FloatArray
from benchrun.contract.kinds import Settable
from benchrun.errors import PluginError
from benchrun.recipe.axis import Evenly
from benchrun.schedule.columns import ON, Block, Codes, Columns, Rows, begins, in_force, index_of
from benchrun.schedule.drive import DRIVE, Driver
from benchrun.schedule.program import Node, Site, StepNode, SweepNode, shape_of
from benchrun.schedule.scope import Scope, in_range
from benchrun.schedule.state import CONNECTED

#: Expansions remembered at most.
MOST_REMEMBERED = 1 << 15


class Table:
    """Works out columns of one program."""

    def __init__(
        self, driver: Driver | None, bias: frozenset[str], scope: Scope, settables: Mapping[str, Settable]
    ) -> None:
        self._driver, self._bias, self._scope, self._settables = driver, bias, scope, settables
        self._vocabulary: list[str] = []
        self._codes: dict[str, int] = {}
        self._remembered: dict[tuple[int, tuple[float, ...]], tuple[Action, ...]] = {}
        # Moments between readings: kept while it is wanted, from the rows where what is being set differs from row to
        # row.
        self._watching = False
        self._distinct: npt.NDArray[np.bool_] = np.ones(1, dtype=np.bool_)
        self._moments: list[tuple[Block, npt.NDArray[np.bool_]]] = []

    def columns(self, site: Site, rounds: Sequence[Codes]) -> Columns:
        """Return the conditions of a place's readings at rounds (N,) of each sweep around. Raises InputError."""
        block = self._at(site, rounds, watch=False)
        return Columns(site.read, index_of(site, rounds), block.values, block.words, self._vocabulary, site.swept)

    def moments(self, site: Site, rounds: Sequence[Codes]) -> Iterator[Columns]:
        """Yield what is in force after each single set on the way from one reading to the next. Raises InputError."""
        self._at(site, rounds, watch=True)
        yield from self._taken_moments(index_of(site, rounds), site.swept)

    def moments_at_end(self, body: Sequence[Node], index: int) -> Iterator[Columns]:
        """Yield the same for what follows the last reading, whose index is `index` - 1."""
        block, self._distinct = Block(1), np.ones(1, dtype=np.bool_)
        for node in body:
            self._whole(node, block, None, watch=True)
        yield from self._taken_moments(np.array([index], dtype=np.intp), ())

    def _taken_moments(self, index: Codes, swept: tuple[str, ...]) -> Iterator[Columns]:
        kept, self._moments = self._moments, []
        for block, rows in kept:
            yield Columns(None, index[rows], block.values, block.words, self._vocabulary, swept)

    # The way to a place

    def _at(self, site: Site, rounds: Sequence[Codes], *, watch: bool) -> Block:
        block, depth = Block(len(rounds[0]) if rounds else 1), 0
        for body, position in zip(site.lists, site.positions, strict=True):
            self._distinct = begins(rounds, depth)
            for node in body[:position]:
                self._whole(node, block, None, watch=watch)
            node = body[position]
            if isinstance(node, SweepNode):
                self._distinct = begins(rounds, depth + 1)
                self._enter(node, rounds[depth], block, watch=watch)
                depth += 1
            else:
                self._step(node, block, None, watch=watch, before_reading=site.nth)
        return block

    def _enter(self, node: SweepNode, rounds: Codes, block: Block, *, watch: bool) -> None:
        later = rounds > 0
        if np.any(later):
            self._round(node, np.maximum(rounds - 1, 0), block, None if np.all(later) else later, watch=watch)
        self._begin(node, rounds, block, None, watch=watch)

    def _whole(self, node: Node, block: Block, rows: Rows, *, watch: bool) -> None:
        if isinstance(node, StepNode):
            self._step(node, block, rows, watch=watch)
            return
        self._round(node, np.full(block.rows, len(node.axis) - 1, dtype=np.intp), block, rows, watch=watch)
        if not node.axis.settable:
            block.leave(node.axis.name)

    def _round(self, node: SweepNode, rounds: Codes, block: Block, rows: Rows, *, watch: bool) -> None:
        """Go through a round that is over.

        Of its moments only those after its last reading are new: the others are on the way to its own readings.
        """
        self._begin(node, rounds, block, rows, watch=False)
        last = max(position for position, inner in enumerate(node.body) if inner.readings)
        for position, inner in enumerate(node.body):
            self._whole(inner, block, rows, watch=watch and position >= last)

    def _begin(self, node: SweepNode, rounds: Codes, block: Block, rows: Rows, *, watch: bool) -> None:
        axis = node.axis
        if axis.kind == "text":
            codes = np.array([self._code(str(word)) for word in axis.values], dtype=np.intp)
            block.word(axis.name, codes[rounds], rows)
        elif axis.settable:
            self._set((axis.name,), (_taken(node, rounds),), block, rows, watch=watch)
        else:
            block.put(axis.name, _taken(node, rounds), rows)

    # Steps

    def _step(
        self, node: StepNode, block: Block, rows: Rows, *, watch: bool, before_reading: int | None = None
    ) -> None:
        if not (node.changes or node.unbiases):
            self._only_signals(node, block, rows, before_reading, watch=watch)
            return
        expansions, which = self._expansions(node, block, rows)
        for position, action in enumerate(expansions[0]):
            if isinstance(action, ReadAction):
                if before_reading == 0:
                    return
                before_reading = None if before_reading is None else before_reading - 1
            self._effect(action, [expansion[position] for expansion in expansions], which, block, rows, watch=watch)

    def _only_signals(
        self, node: StepNode, block: Block, rows: Rows, before_reading: int | None, *, watch: bool
    ) -> None:
        """A step that changes no condition leaves on what its last reading has on, or the one that it waits for."""
        reads = node.reads if before_reading is None else node.reads[:before_reading]
        if reads:
            self._on(reads[-1].signals, block, rows)
        elif not node.reads:
            self._on(node.following, block, rows)
            if watch and node.apart and node.following:
                self._keep_moment(block, rows)

    def _effect(
        self, action: Action, every: Sequence[Action], which: Codes, block: Block, rows: Rows, *, watch: bool
    ) -> None:
        """Bring an action into force: `every` holds it for each combination, `which` (N,) says whose is whose."""
        if isinstance(action, SetAction):
            table = np.array([[value for _, value in one.values] for one in every if isinstance(one, SetAction)])
            self._set([name for name, _ in action.values], tuple(table[which].T), block, rows, watch=watch)
        elif isinstance(action, ReadAction | SettleAction):
            self._on(action.signals, block, rows)
            if watch and isinstance(action, SettleAction):
                self._keep_moment(block, rows)
        elif isinstance(action, AskAction | ProcedureAction):
            block.forget(self._bias, rows)
            self._on((), block, rows)
        if isinstance(action, AskAction) and action.connect is not None:
            codes = [self._code(one.connect[1]) for one in every if isinstance(one, AskAction) and one.connect]
            block.word(CONNECTED + action.connect[0], np.array(codes, dtype=np.intp)[which], rows)

    def _on(self, signals: Sequence[str], block: Block, rows: Rows) -> None:
        block.word(ON, np.full(block.rows, self._code(" ".join(signals)), dtype=np.intp), rows)

    def _set(
        self, names: Sequence[str], columns: Sequence[FloatArray], block: Block, rows: Rows, *, watch: bool
    ) -> None:
        for name, column in zip(names, columns, strict=True):
            self._check_range(name, column, rows)
            block.put(name, column, rows)
            if self._driver is not None:
                self._follow_drive(self._driver, name, block, rows)
            if watch and self._at_sources(name):
                self._keep_moment(block, rows)

    def _keep_moment(self, block: Block, rows: Rows) -> None:
        there = self._distinct if rows is None else self._distinct & rows
        self._moments.append((block.taken(there), there))

    @staticmethod
    def _at_sources(name: str) -> bool:
        return name == DRIVE or name.endswith((".level", ".frequency"))

    def _check_range(self, name: str, column: FloatArray, rows: Rows) -> None:
        settable, there = self._settables.get(name), column if rows is None else column[rows]
        if settable is not None:
            for extreme in (np.min(there), np.max(there)):
                in_range(float(extreme), settable)

    def _follow_drive(self, driver: Driver, name: str, block: Block, rows: Rows) -> None:
        if name == driver.level:
            block.forget(frozenset({DRIVE}), rows)
        elif name in (DRIVE, driver.frequency) and DRIVE in block.values and driver.frequency in block.values:
            _set_level(driver, block, rows)

    # Expansions

    def _expansions(self, node: StepNode, block: Block, rows: Rows) -> tuple[list[tuple[Action, ...]], Codes]:
        """Return the different expansions of a step over the rows, and for each row which of them is its."""
        there = np.arange(block.rows) if rows is None else np.flatnonzero(rows)
        which = np.zeros(block.rows, dtype=np.intp)
        while True:
            seen = node.uses
            names = sorted(name for name in seen if name in block.values or name in block.words)
            looked_at = [block.words[n] if n in block.words else block.values[n] for n in names]
            first, which[there] = _different([column[there] for column in looked_at], len(there))
            found = [self._expansion(node, names, block, int(there[row])) for row in first]
            if node.uses == seen:
                return found, which

    def _expansion(self, node: StepNode, names: Sequence[str], block: Block, row: int) -> tuple[Action, ...]:
        key = id(node), tuple(float(block.words[n][row] if n in block.words else block.values[n][row]) for n in names)
        known = self._remembered.get(key)
        if known is None:
            if len(self._remembered) > MOST_REMEMBERED:
                self._remembered.clear()
            there = in_force(block.values, block.words, self._vocabulary, row)
            known = self._remembered[key] = tuple(self._scope.expanded(node, *there))
            node.uses |= self._scope.noted
            if shape_of(known) != node.shape:
                raise PluginError(
                    f"{node.place.file}:{node.place.line}: step '{node.spec.key}' does other things at some conditions "
                    f"than at others: it {'; '.join(shape_of(known))}. Only values may follow the conditions."
                )
        return known

    def _code(self, word: str) -> int:
        if word not in self._codes:
            self._codes[word] = len(self._vocabulary)
            self._vocabulary.append(word)
        return self._codes[word]


def _set_level(driver: Driver, block: Block, rows: Rows) -> None:
    """Let the level follow the drive where drive and frequency are in force; each pair is worked out once."""
    drive, frequency = block.values[DRIVE], block.values[driver.frequency]
    there = np.isfinite(drive) & np.isfinite(frequency)
    if rows is not None:
        there &= rows
    if not np.any(there):
        return
    pairs, which = np.unique(drive[there] + 1j * frequency[there], return_inverse=True)
    level = np.full(block.rows, np.nan)
    level[there] = driver.levels_dbm(pairs.real.copy(), pairs.imag.copy())[which]
    block.put(driver.level, level, there)


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
