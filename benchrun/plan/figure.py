"""One level at many conditions with its limit, and the worst of it that was met."""

from __future__ import annotations

from collections.abc import Callable, Iterator
from dataclasses import dataclass
from typing import Literal

import numpy as np

from benchrun.contract.capture import FloatArray
from benchrun.plan.decibels import together_dbm

LimitKind = Literal["maximum", "linear", "damage"]
#: A level is over its limit when it is so by more than this: rounding is no reason to refuse.
TOLERANCE_DB = 1e-6
#: The tone of several signals together.
TOGETHER = "together"


@dataclass(frozen=True, slots=True)
class Limit:
    """A limit: the most that is allowed, up to where something is linear, or above what it is damaged."""

    kind: LimitKind
    level_dbm: float

    @classmethod
    def of(cls, kind: LimitKind, level_dbm: float | None) -> Limit | None:
        """Return the limit, None where none is given."""
        return None if level_dbm is None else cls(kind, level_dbm)


@dataclass(frozen=True, slots=True)
class Figure:
    """The level (N,) of a tone at a plane over N conditions, NaN where it is absent. `receiver` reads it."""

    plane: str
    tone: str
    level_dbm: FloatArray
    limit: Limit | None = None
    note: str = ""
    receiver: str = ""

    @property
    def key(self) -> tuple[str, LimitKind | None]:
        """Plane and kind of limit: what the same tones add up at."""
        return self.plane, self.limit.kind if self.limit else None


@dataclass(slots=True)
class Worst:
    """The highest level met, and where: a description that is only made when it is asked for."""

    figure: Figure
    level_dbm: float
    where: Callable[[], str]


class WorstCases:
    """The highest level of each tone at each plane, in the order in which planes were first met."""

    def __init__(self) -> None:
        self.found: dict[tuple[str, str, LimitKind | None], Worst] = {}
        self.lowest: dict[tuple[str, str], float] = {}
        """The lowest level of each tone at what reads it linearly."""

    def take(self, figures: Iterator[Figure], where: Callable[[int], str]) -> None:
        """Take figures over the same N conditions; `where` describes the n-th of them."""
        planes: dict[tuple[str, LimitKind | None], dict[str, Figure]] = {}
        for figure in figures:
            there = planes.setdefault(figure.key, {})
            there[figure.tone] = _higher(there[figure.tone], figure) if figure.tone in there else figure
        for tones in planes.values():
            for figure in tones.values():
                self._keep(figure, where)
            if len(tones) > 1:
                self._keep(_added(list(tones.values())), where)

    def _keep(self, figure: Figure, where: Callable[[int], str]) -> None:
        if np.all(np.isnan(figure.level_dbm)):
            return
        n = int(np.nanargmax(figure.level_dbm))
        level = float(figure.level_dbm[n])
        if figure.receiver and figure.key[1] == "linear":
            lowest = float(np.nanmin(figure.level_dbm)), self.lowest.get((figure.receiver, figure.tone), np.inf)
            self.lowest[figure.receiver, figure.tone] = min(lowest)
        key = (figure.plane, figure.tone, figure.key[1])
        if key not in self.found or level > self.found[key].level_dbm:
            self.found[key] = Worst(figure, level, lambda: where(n))


def _higher(one: Figure, other: Figure) -> Figure:
    """Return the same plane and tone with the higher of two levels: what goes in, and what comes back."""
    level = np.fmax(one.level_dbm, other.level_dbm)
    return Figure(one.plane, one.tone, level, one.limit, one.note or other.note, one.receiver)


def _added(figures: list[Figure]) -> Figure:
    """Return all tones of a plane together, where two or more are there at once."""
    levels = [figure.level_dbm for figure in figures]
    several = np.sum([~np.isnan(level) for level in levels], axis=0) > 1
    total = np.where(several, together_dbm(levels), np.nan)
    return Figure(figures[0].plane, TOGETHER, total, figures[0].limit, "", figures[0].receiver)
