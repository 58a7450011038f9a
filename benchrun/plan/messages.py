"""What a level over its limit would do, and what to change."""

from __future__ import annotations

from benchrun.plan.figure import LimitKind
from benchrun.plan.waves import POWER_UP


def consequence(plane: str, kind: LimitKind | None) -> str:
    """Return what would happen."""
    if kind == "linear":
        return "It would compress, and the reading would be wrong beyond what is corrected."
    if kind == "damage":
        return f"It may be damaged{', and so may what is connected there' if plane.startswith('device') else ''}."
    if plane.startswith("device"):
        return "The device may be damaged."
    return "The bench file's ceiling or the instrument's own limit forbids it."


def advice(plane: str, tone: str, over_db: float) -> str:
    """Return what to change by `over_db`."""
    if tone == POWER_UP:
        return f"Put {over_db:.1f} dB or more between the port and there, or let the instrument start with less."
    lower = f"Lower the {'signals' if tone == 'together' else 'drive' if tone == 'pump' else tone} by {over_db:.1f} dB"
    if plane.startswith("receiver"):
        return f"{lower}, or put a larger pad before it."
    if plane.startswith("into ") or "port" in plane:
        return f"{lower}, or put more loss before it."
    if plane.startswith("device") or plane.endswith("output"):
        return f"{lower}."
    return f"{lower}, or protect it with a pad."
