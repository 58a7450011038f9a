"""How single figures look in a terminal: levels with their sign, times as a person says them."""

from __future__ import annotations

from typing import cast

from benchrun.contract.kinds import UNIT_SUFFIX, Kind
from benchrun.quantities import show

_KIND_OF = {suffix: cast(Kind, kind) for kind, suffix in UNIT_SUFFIX.items()}


def level_text(level_dbm: float | None) -> str:
    """Return a level as '+30.6 dBm'; '-' where there is none."""
    return "-" if level_dbm is None else f"{level_dbm:+.1f} dBm"


def ratio_text(ratio_db: float | None) -> str:
    """Return a ratio as '2.4 dB'; '-' where there is none."""
    return "-" if ratio_db is None else f"{ratio_db:.1f} dB"


def duration_text(duration_s: float) -> str:
    """Return a duration as a person says it: '40 s', '22 min', '3 h 20 min'."""
    if duration_s < 90:
        return f"{duration_s:.0f} s"
    minutes = round(duration_s / 60)
    if minutes < 90:
        return f"{minutes} min"
    hours, rest = divmod(minutes, 60)
    return f"{hours} h {rest} min" if rest else f"{hours} h"


def clock_text(duration_s: float) -> str:
    """Return a duration as minutes and seconds, '0:08', or hours, '3:20:00'."""
    minutes, seconds = divmod(round(duration_s), 60)
    hours, minutes = divmod(minutes, 60)
    return f"{hours}:{minutes:02}:{seconds:02}" if hours else f"{minutes}:{seconds:02}"


def condition_text(key: str, value: float | str) -> str:
    """Return a condition of a reading for a person: ("pump.level_dbm", 3.0) gives 'pump.level +3.0 dBm'."""
    if isinstance(value, str):
        return f"{key.replace('connected.', 'at ')} {value}"
    name, _, suffix = key.rpartition("_")
    match _KIND_OF.get(suffix):
        case None:
            return f"{key} {value:g}"
        case "level":
            return f"{name} {level_text(value)}"
        case kind:
            return f"{name} {show(value, kind, 6)}"


def count_text(count: int, thing: str) -> str:
    """Return '1377 conditions', '1 condition', 'no condition'."""
    return f"{count or 'no'} {thing}{'s' if count > 1 else ''}"
