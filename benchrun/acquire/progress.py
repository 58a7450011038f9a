"""What an acquisition tells whoever watches. The terminal's form of it is in cli."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Protocol


class Progress(Protocol):
    """Told of a run as it goes; must be quick, and must not raise."""

    def begin(self, title: str, total: int, note: str) -> None:
        """A recipe with `total` readings starts."""

    def phase(self, name: str, text: str) -> None:
        """A part of the run ("bring-up", "bring-down") starts, or says what it found."""

    def reading(
        self,
        index: int,
        total: int,
        conditions: Mapping[str, float | str],
        elapsed_s: float,
        left_s: float,
        bench_left_s: float,
        flags: Sequence[str],
    ) -> None:
        """Reading `index` of `total` is committed; `left_s` on the wall and `bench_left_s` of bench time are left."""

    def message(self, text: str) -> None:
        """Something to be read."""

    def pause(self) -> None:
        """Somebody else is about to use the terminal."""

    def end(self) -> None:
        """The run is over."""


class Silent:
    """Watches nothing (Progress)."""

    def begin(self, title: str, total: int, note: str) -> None:
        """Say nothing."""

    def phase(self, name: str, text: str) -> None:
        """Say nothing."""

    def reading(
        self,
        index: int,
        total: int,
        conditions: Mapping[str, float | str],
        elapsed_s: float,
        left_s: float,
        bench_left_s: float,
        flags: Sequence[str],
    ) -> None:
        """Say nothing."""

    def message(self, text: str) -> None:
        """Say nothing."""

    def pause(self) -> None:
        """Say nothing."""

    def end(self) -> None:
        """Say nothing."""
