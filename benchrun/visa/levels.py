"""Ceiling and ramp: what keeps a level from going where the bench file does not allow it. Pure."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from itertools import pairwise

from benchrun.contract.roles import Value
from benchrun.errors import InstrumentError
from benchrun.quantities import show

#: Differences below this are rounding, not a rise.
ROUNDING_DB = 1e-9


def levels_of(value: Value) -> tuple[float, ...]:
    """Return the level, or all levels of a list, as numbers. Raises InstrumentError for what is no level."""
    several = value if isinstance(value, Sequence) and not isinstance(value, str) else (value,)
    if any(isinstance(level, str) for level in several):
        raise InstrumentError(f"{value!r} is not a level")
    return tuple(float(level) for level in several)


def check_ceiling(levels_dbm: Sequence[float], ceiling_dbm: float | None) -> None:
    """Raise InstrumentError for a level above the ceiling, any level where there is none, and what is no number."""
    if ceiling_dbm is None:
        raise InstrumentError(
            "the bench file gives no ceiling for this instrument, so no level is sent; add `ceiling:`"
        )
    for level in levels_dbm:
        if not level <= ceiling_dbm:
            raise InstrumentError(
                f"{show(level, 'level')} is above its ceiling in the bench file, {show(ceiling_dbm, 'level')}"
            )


def check_rises(levels_dbm: Sequence[float], ramp_db: float | None) -> None:
    """Raise InstrumentError where a list of levels, played round and round, rises by more than the ramp in one step."""
    for before, after in pairwise([*levels_dbm, levels_dbm[0]]):
        if ramp_db is not None and after - before > ramp_db + ROUNDING_DB:
            raise InstrumentError(
                f"the list of levels rises from {show(before, 'level')} to {show(after, 'level')} in one step; "
                f"the bench file's ramp is {show(ramp_db, 'ratio')}"
            )


def rise(now_dbm: float, target_dbm: float, ramp_db: float | None) -> Iterator[float]:
    """Yield the levels between now and the target, none more than the ramp above the last; not the target."""
    if ramp_db is None:
        return
    while target_dbm - now_dbm > ramp_db + ROUNDING_DB:
        now_dbm += ramp_db
        yield now_dbm
