"""The level check: the worst case at every plane over all conditions of a schedule, before anything is switched on."""

from __future__ import annotations

import itertools
import math
from collections.abc import Iterator, Sequence
from dataclasses import asdict, dataclass
from typing import Any

from benchrun.bench import Bench
from benchrun.errors import LevelError
from benchrun.plan.conditions import Where, conditions_of
from benchrun.plan.figure import TOGETHER, TOLERANCE_DB, Figure, LimitKind, Worst, WorstCases
from benchrun.plan.messages import advice, consequence
from benchrun.plan.notes import notes_of
from benchrun.plan.waves import BenchLevels
from benchrun.schedule import Schedule
from benchrun.schedule.program import ReadSite

#: Less compression than this is not told.
WORTH_TELLING_DB = 0.01
#: A tone that is so much below another one at the same plane is not told, except at receivers.
LOST_DB = 30.0


@dataclass(frozen=True, slots=True)
class LevelRow:
    """The worst case of one tone at one plane. Levels in dBm; None without a limit. `worst` says at which condition."""

    plane: str
    tone: str
    level_dbm: float
    limit_dbm: float | None
    limit_kind: LimitKind | None
    margin_db: float | None
    note: str
    worst: str
    refused: bool


@dataclass(frozen=True, slots=True)
class LevelTable:
    """The level check of a schedule: what is over its limit first, then in the order of the ways of the signals."""

    rows: tuple[LevelRow, ...]
    conditions: int
    notes: tuple[str, ...] = ()
    """What else the levels tell beforehand."""

    @property
    def refused(self) -> bool:
        """Whether any level is over a limit that must hold."""
        return any(row.refused for row in self.rows)

    def require(self) -> None:
        """Raise LevelError, which says of each level over its limit where, what would happen and what to change."""
        offenders = [row for row in self.rows if row.refused]
        if offenders:
            count = "1 level is" if len(offenders) == 1 else f"{len(offenders)} levels are"
            lines = [f"{count} over the limit at the worst phase of reflections. Nothing was switched on."]
            raise LevelError("\n".join([*lines, *map(_told, offenders)]))

    def to_dict(self) -> dict[str, Any]:
        """Return plain JSON-like data."""
        return {"refused": self.refused, "conditions": self.conditions, "rows": [asdict(row) for row in self.rows]}


def check_levels(schedule: Schedule, bench: Bench) -> LevelTable:
    """Return the worst levels over all readings of a schedule, and over the moments between them. Touches nothing.

    Raises FileProblemsError where a part's table does not reach a frequency, CalibrationError where a levelled drive
    does not reach a condition, InputError where a condition is beyond what an instrument can be set to.
    """
    levels, worst = BenchLevels(bench), WorstCases()
    for columns in itertools.chain(schedule.columns(), schedule.moments()):
        for conditions, rows in conditions_of(bench, schedule, columns):
            where = Where(schedule, columns, rows)
            worst.take(_wanted(levels.figures(conditions), columns.read), where)
            if columns.read is not None:
                worst.take(levels.power_up_figures(conditions), where)
    found = [_row(bench, case) for case in worst.found.values()]
    ranked = sorted(_nearest(found), key=lambda row: (row.margin_db or 0.0) if row.refused else math.inf)
    return LevelTable(tuple(ranked), len(schedule), tuple(_notes(bench, schedule, worst)))


def _notes(bench: Bench, schedule: Schedule, worst: WorstCases) -> Iterator[str]:
    """Yield the notes: a receiver samples the signal of its own coupler's way; the other ones are beside it."""
    lowest, highest = dict[str, float](), dict[str, float]()
    for name, receiver in bench.receivers.items():
        for signal, described in bench.signals.items():
            key = (f"receiver {name}", signal, "linear")
            if receiver.coupler in described.path and (name, signal) in worst.lowest:
                lowest[name] = worst.lowest[name, signal]
            elif receiver.coupler not in described.path and key in worst.found:
                highest[name] = worst.found[key].level_dbm
    return notes_of(bench, schedule.bandwidth_hz, lowest, highest)


def _wanted(figures: Iterator[Figure], read: ReadSite | None) -> Iterator[Figure]:
    """Leave out where a receiver or a meter is linear while nobody reads it."""
    reading = set() if read is None else {*read.waves, *(name.partition(".")[0] for name in read.scalars)}
    for figure in figures:
        idle = figure.receiver and figure.receiver not in reading
        if not (idle and figure.limit is not None and figure.limit.kind == "linear"):
            yield figure


def _row(bench: Bench, case: Worst) -> LevelRow:
    figure, limit = case.figure, case.figure.limit
    margin = None if limit is None else limit.level_dbm - case.level_dbm
    must_hold = limit is not None and (limit.kind != "linear" or bool(figure.receiver))
    refused = must_hold and margin is not None and margin < -TOLERANCE_DB
    worst = case.where()
    told = _because(figure, worst, -(margin or 0.0)) if refused else _remark(bench, figure, case.level_dbm)
    return LevelRow(
        plane=figure.plane,
        tone=figure.tone,
        level_dbm=case.level_dbm,
        limit_dbm=None if limit is None else limit.level_dbm,
        limit_kind=None if limit is None else limit.kind,
        margin_db=margin,
        note=told,
        worst=worst,
        refused=refused,
    )


def _because(figure: Figure, worst: str, over_db: float) -> str:
    """Return at which condition a level is over its limit, what would happen, and what to change."""
    happens = consequence(figure.plane, figure.key[1])
    return f"at {worst}. {happens} {advice(figure.plane, figure.tone, over_db)}"


def _remark(bench: Bench, figure: Figure, level_dbm: float) -> str:
    return "; ".join(note for note in (_compression(bench, figure, level_dbm), figure.note) if note)


def _compression(bench: Bench, figure: Figure, level_dbm: float) -> str:
    """Return by how much a receiver compresses at a level: in dB in proportion to power (METHODS section 3)."""
    if figure.limit is None or figure.limit.kind != "linear":
        return ""
    if not figure.receiver:
        return "it compresses; the drive is then what a levelling says" if level_dbm > figure.limit.level_dbm else ""
    described = bench.receivers.get(figure.receiver)
    own = bench.instruments[described.instrument].receiver if described is not None else None
    if own is None or own.compression is None:
        return ""
    loss_db = own.compression.loss * 10.0 ** ((level_dbm - own.compression.at) / 10.0)
    return f"{loss_db:.2f} dB compressed, corrected" if loss_db >= WORTH_TELLING_DB else ""


def _nearest(rows: Sequence[LevelRow]) -> list[LevelRow]:
    """Keep what is refused; of one tone at one plane the nearest limit, and no tone that is lost in others.

    Tones together are kept at receivers, and where they are over a limit that neither of them is over.
    """
    nearest: dict[tuple[str, str], LevelRow] = {}
    highest: dict[str, float] = {}
    for row in rows:
        before = nearest.get((row.plane, row.tone))
        if before is None or _margin(row) < _margin(before):
            nearest[row.plane, row.tone] = row
        highest[row.plane] = max(row.level_dbm, highest.get(row.plane, -math.inf))
    alone = {(row.plane, row.limit_kind) for row in rows if row.refused and row.tone != TOGETHER}
    return [row for row in rows if _kept(row, row is nearest[row.plane, row.tone], highest[row.plane], alone)]


def _kept(row: LevelRow, nearest: bool, highest_dbm: float, alone: set[tuple[str, LimitKind | None]]) -> bool:
    if row.refused:
        return row.tone != TOGETHER or (row.plane, row.limit_kind) not in alone
    if row.plane.startswith("receiver"):
        return nearest
    return nearest and row.tone != TOGETHER and row.level_dbm > highest_dbm - LOST_DB


def _margin(row: LevelRow) -> float:
    return math.inf if row.margin_db is None else row.margin_db


def _told(row: LevelRow) -> str:
    over_db = -(row.margin_db or 0.0)
    return (
        f"{row.plane}: {row.tone} {row.level_dbm:+.1f} dBm, {over_db:.1f} dB over the {row.limit_kind} limit of "
        f"{row.limit_dbm:+.1f} dBm, {row.note}"
    )
