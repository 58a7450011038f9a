"""What a person sees while a recipe is rehearsed or run: one live line on a terminal, now and then a line elsewhere.

On a terminal the last line shows where the run is and is drawn over; what happened stays above it. Elsewhere (a file,
a pipe, a service's log) a line comes every half minute at most. Everything goes to standard error.
"""

from __future__ import annotations

import sys
import time
from collections import Counter
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING, Self

from benchrun.cli.figures import clock_text, condition_text, duration_text
from benchrun.cli.streams import columns, talk

if TYPE_CHECKING:
    from rich.live import Live

LIVE_INTERVAL_S = 0.1
CALM_INTERVAL_S = 30.0
NAME_WIDTH = 10


class TerminalProgress:
    """The listener of a run (acquire.progress.Progress).

    Use it as a context, so that the live line is gone before anything else is printed.
    """

    def __init__(self, now_s: Callable[[], float] = time.monotonic) -> None:
        self._now_s = now_s
        self._live: Live | None = None
        self._phase = ""
        self._varying = Varying()
        self._flagged = 0
        self._next_s = 0.0
        self._widest: dict[str, int] = {}

    def __enter__(self) -> Self:
        return self

    def __exit__(self, *error: object) -> None:
        self.end()

    def begin(self, title: str, total: int, note: str) -> None:  # noqa: ARG002  the live line has the total
        """Say what starts."""
        self.pause()
        self._varying, self._flagged, self._phase = Varying(), 0, ""
        self._next_s = self._now_s() + (0.0 if columns(err=True) else CALM_INTERVAL_S)
        talk(title)
        if note:
            talk(note)

    def phase(self, name: str, text: str) -> None:
        """Say what part of the run this is, and what it found; an empty text only names it for the live line."""
        self._phase = name
        if text:
            self.message(f"{name:<{NAME_WIDTH}} {text}")

    def reading(
        self,
        index: int,
        total: int,
        conditions: Mapping[str, float | str],
        elapsed_s: float,  # noqa: ARG002
        left_s: float,
        bench_left_s: float,
        flags: Sequence[str],
    ) -> None:
        """Show how far the readings are; cheap enough to be called for each of them."""
        self._varying.see(conditions)
        self._flagged += bool(flags)
        if (now_s := self._now_s()) < self._next_s:
            return
        where = "  ".join(self._steady(condition_text(key, conditions[key]), key) for key in self._varying.names())
        self._show(now_s, Line(self._phase, where, (index + 1) / max(total, 1), left_s, bench_left_s, self._flagged))

    def _steady(self, text: str, key: str) -> str:
        """Fill `text` up to the widest so far under this key, so that what follows it does not jump."""
        self._widest[key] = max(self._widest.get(key, 0), len(text))
        return text.ljust(self._widest[key])

    def message(self, text: str) -> None:
        """Print a line that stays."""
        self.pause()
        talk(text)

    def pause(self) -> None:
        """Take the live line away, so that something else can use the terminal; the next reading brings it back."""
        if self._live is not None:
            self._live.stop()
            self._live = None

    def end(self) -> None:
        """Leave the terminal as it was."""
        self.pause()

    def _show(self, now_s: float, line: Line) -> None:
        width = columns(err=True)
        if width is None:
            self._next_s = now_s + CALM_INTERVAL_S
            talk(line.fitted(None))
            return
        self._next_s = now_s + LIVE_INTERVAL_S
        if self._live is None:
            self._live = _live_line()
        self._live.update(line.fitted(width - 1), refresh=True)


@dataclass(frozen=True, slots=True)
class Line:
    """The line that says where a run is."""

    phase: str
    where: str
    fraction: float
    left_s: float
    bench_left_s: float
    flagged: int

    def fitted(self, width: int | None) -> str:
        """Return the line without its bar, or the longest form that is at most `width` columns wide."""
        percent = f"{self.fraction * 100:3.0f} %"
        flagged = f"{self.flagged} flagged" if self.flagged else ""
        ends = (percent, f"{clock_text(self.left_s)} left")
        where = f"{self.phase:<{NAME_WIDTH}} {self.where}" if self.where else self.phase
        bench = ""
        if self.bench_left_s > 2 * self.left_s + 1:  # worth saying only where bench time is not the time on the wall
            bench = f"({duration_text(self.bench_left_s)} of bench time)"
        if width is None:
            return _joined(where, *ends, bench, flagged)
        forms = (
            _joined(where, self._bar(12), *ends, bench, flagged),
            _joined(where, self._bar(12), *ends, flagged),
            _joined(where, self._bar(6), *ends, flagged),
            _joined(where, *ends, flagged),
            _joined(self.phase, *ends, flagged),
        )
        return next((form for form in forms if len(form) <= width), percent.strip())

    def _bar(self, width: int) -> str:
        done = int(self.fraction * width)
        return "#" * done + "." * (width - done)


class Varying:
    """Finds the conditions worth showing: each sweep's own variable, and other quantities that a recipe sweeps."""

    def __init__(self) -> None:
        self._last: Mapping[str, float | str] = {}
        self._changes: Counter[str] = Counter()

    def see(self, conditions: Mapping[str, float | str]) -> None:
        """Take the next reading's conditions."""
        self._changes.update(key for key, value in conditions.items() if self._last.get(key, value) != value)
        self._last = conditions

    def names(self) -> list[str]:
        """Return the names to show, the slowest first.

        A sweep's own variable ("frequency_hz") is always shown; a quantity of the bench ("pump.level_dbm") where it is
        swept by itself, and not where it only follows a variable ("pump.frequency_hz").
        """
        shown = {key: self._changes[key] for key in self._last if "." not in key}
        for key in self._last:
            if self._changes[key] and self._changes[key] not in shown.values():
                shown[key] = self._changes[key]
        return sorted(shown, key=shown.__getitem__)


def _joined(*parts: str) -> str:
    return "  ".join(part for part in parts if part)


def _live_line() -> Live:
    """Start a line that is drawn over, with the cursor left visible in case the process is killed."""
    from rich.console import Console
    from rich.live import Live

    console = Console(file=sys.stderr, force_terminal=True, no_color=True, markup=False, highlight=False, emoji=False)
    live = Live(console=console, auto_refresh=False, transient=True, redirect_stdout=False, redirect_stderr=False)
    live.start()
    console.show_cursor(True)
    return live
