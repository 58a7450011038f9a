"""A file's data, with the line and column of every key and value."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

from benchrun.errors import Problem

#: Line and column, from 1.
Mark = tuple[int, int]
#: The way into a file's data: keys and positions.
Path_ = tuple[str | int, ...]
START: Mark = (1, 1)


class Placed(dict[str, Any]):
    """A mapping of a file that knows where its keys and values stand."""

    def __init__(self) -> None:
        super().__init__()
        self.keys_at: dict[str, Mark] = {}
        self.values_at: dict[str, Mark] = {}


class PlacedList(list[Any]):
    """A sequence of a file that knows where its items stand."""

    def __init__(self) -> None:
        super().__init__()
        self.items_at: list[Mark] = []


@dataclass(slots=True)
class Source:
    """A file as read: its name as the user wrote it, its text, its data, and what is wrong with it."""

    file: str
    text: str = ""
    data: Any = None
    problems: list[Problem] = field(default_factory=list)

    def problem(self, where: Path_, message: str, *, at_key: bool = False) -> Problem:
        """Return a Problem at a path into the data: at the value, or at its key. The message becomes a sentence."""
        sentence = message if message.endswith((".", "?")) else f"{message}."
        return Problem(self.file, *self.mark(where, at_key=at_key), sentence)

    def written(self, path: Path_, otherwise: Any) -> Any:
        """Return what the file holds at `path`; `otherwise` where the path does not lead anywhere."""
        here = self.data
        for step in path:
            try:
                here = here[step]
            except (LookupError, TypeError):
                return otherwise
        return here

    def whole(self, message: str) -> Source:
        """Note a problem of the file as a whole, and return this."""
        self.problems.append(Problem(self.file, 0, 0, message))
        return self

    def mark(self, path: Path_, *, at_key: bool = False) -> Mark:
        """Return line and column of the value (or of its key) at `path`.

        Steps of the path that the data do not have are passed over, so that a mistake in something absent is told at
        what it is absent from.
        """
        here, value_at, key_at = self.data, START, START
        for step in path:
            if isinstance(here, Placed) and step in here:
                key = str(step)
                here, value_at, key_at = here[key], here.values_at[key], here.keys_at[key]
            elif isinstance(here, PlacedList) and isinstance(step, int) and 0 <= step < len(here):
                here, value_at = here[step], here.items_at[step]
                key_at = value_at
        return key_at if at_key else value_at
