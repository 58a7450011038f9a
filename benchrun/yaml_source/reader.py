"""Read YAML files as plain data.

Rules that this keeps, whatever stands in a file:
- YAML 1.2, one document, plain data: anchors, aliases, tags, directives, merge keys and repeated keys are refused;
- plain scalars are null, true, false, decimal numbers or text; nothing else is guessed;
- size, depth and number of values are bounded while reading, so that no file can fill the memory;
- nothing is raised: what is wrong is in Source.problems; Source.data is None only where there is nothing to go on with.
"""

from __future__ import annotations

import re
from collections.abc import Iterator
from pathlib import Path
from typing import Any

from ruamel.yaml import YAML
from ruamel.yaml.error import MarkedYAMLError, YAMLError
from ruamel.yaml.events import (
    AliasEvent,
    DocumentStartEvent,
    Event,
    MappingEndEvent,
    MappingStartEvent,
    ScalarEvent,
    SequenceEndEvent,
    SequenceStartEvent,
    StreamEndEvent,
)

from benchrun.errors import Problem
from benchrun.yaml_source.places import START, Mark, Placed, PlacedList, Source

MAX_BYTES = 1_000_000
MAX_DEPTH = 40
MAX_NODES = 20_000

_NULL = ("", "~", "null", "Null", "NULL")
_SWITCH = {"true": True, "True": True, "TRUE": True, "false": False, "False": False, "FALSE": False}
#: Whole numbers that are written in the one way that str() writes them too; with leading zeros it is a serial number.
_INTEGER = re.compile(r"0|-?[1-9][0-9]{0,17}")
_FLOAT = re.compile(r"[-+]?(?:[0-9]+\.[0-9]*|\.[0-9]+|[0-9]+(?=[eE]))(?:[eE][-+]?[0-9]+)?")
_BARE_REFERENCE = re.compile(r"(?<!\")\{[A-Za-z][A-Za-z0-9.-]*\}")


class _EndError(Exception):
    """Reading ends here; the problem is noted."""


def read_source(path: Path) -> Source:
    """Read a YAML file. Never raises for what stands in it, nor for a file that cannot be read: see Source.problems."""
    source = Source(str(path))
    try:
        raw = path.read_bytes() if path.stat().st_size <= MAX_BYTES else None
    except FileNotFoundError:
        return source.whole("there is no such file. Check the name and the folder.")
    except IsADirectoryError:
        return source.whole("is a folder, not a file.")
    except (OSError, ValueError) as error:
        return source.whole(f"cannot be read ({getattr(error, 'strerror', None) or error}).")
    if raw is None:
        return source.whole(f"is larger than {MAX_BYTES} bytes; no file of this kind is.")
    try:
        source.text = raw.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        return source.whole(f"is not UTF-8 text (byte {error.start}). Save it as UTF-8.")
    return _parsed(source)


def read_text(text: str, file: str) -> Source:
    """Read YAML from a text that came from a file called `file`."""
    return _parsed(Source(file, text))


def _parsed(source: Source) -> Source:
    try:
        source.data = _Builder(source).build(YAML(typ="safe", pure=True).parse(source.text))
    except _EndError:
        pass
    except MarkedYAMLError as error:
        mark = error.problem_mark or error.context_mark
        place: Mark = (mark.line + 1, mark.column + 1) if mark else START
        reason = " ".join(str(error.problem or error.context).split())
        source.problems.append(Problem(source.file, *place, f"this is not YAML: {reason}.{_hint(source.text, place)}"))
    except (YAMLError, ValueError, LookupError, AttributeError, TypeError, AssertionError, RecursionError) as error:
        # For odd characters the library raises unplaced errors, its own and plain ones: the text is at fault each time.
        source.whole(f"cannot be read as YAML ({(str(error).splitlines() or [''])[0] or type(error).__name__}).")
    return source


def _hint(text: str, place: Mark) -> str:
    lines = text.split("\n")
    line = lines[min(place[0], len(lines)) - 1]
    if "\t" in line[: len(line) - len(line.lstrip())]:
        return " Lines are indented with spaces, never with tabs."
    reference = _BARE_REFERENCE.search(line)
    return f' A reference is written in quotes: "{reference[0]}".' if reference else ""


def _mark(event: Event) -> Mark:
    return event.start_mark.line + 1, event.start_mark.column + 1


class _Builder:
    """Turns the parser's events into plain data with marks; what is open is on a stack, so depth is no danger."""

    def __init__(self, source: Source) -> None:
        self._source = source
        self._open: list[_Open] = []
        self._nodes = 0
        self._data: Any = None
        self._documents = 0

    def build(self, events: Iterator[Event]) -> Any:
        """Return the data of the one document."""
        for event in events:
            if isinstance(event, DocumentStartEvent):
                self._begin(event)
            elif isinstance(event, AliasEvent):
                self._tell(event, f"the alias '*{event.anchor}' is not taken: write the value out where it is needed.")
                self._put(None, event)
            elif isinstance(event, ScalarEvent):
                self._plain(event)
                self._put(_scalar(event), event)
            elif isinstance(event, MappingStartEvent | SequenceStartEvent):
                self._plain(event)
                self._enter(event)
            elif isinstance(event, MappingEndEvent | SequenceEndEvent):
                self._leave()
            elif isinstance(event, StreamEndEvent) and (
                not self._documents or (self._data is None and not self._source.problems)
            ):
                self._source.whole("is empty.")
        return self._data

    def _begin(self, event: DocumentStartEvent) -> None:
        self._documents += 1
        if self._documents > 1:
            self._tell(event, "a second document begins here; a file holds one.")
            raise _EndError
        if event.version not in (None, (1, 2)) or event.tags:
            self._tell(event, "directives (%YAML, %TAG) are not taken.")

    def _plain(self, event: Any) -> None:
        """Refuse what is not plain data, and what is too much of it."""
        self._nodes += 1
        if self._nodes > MAX_NODES or len(self._open) > MAX_DEPTH:
            limit = (
                f"nested deeper than {MAX_DEPTH} levels"
                if len(self._open) > MAX_DEPTH
                else f"more than {MAX_NODES} values"
            )
            self._tell(event, f"{limit}; no file of this kind is.")
            raise _EndError
        if event.anchor is not None:
            self._tell(event, f"the anchor '&{event.anchor}' is not taken: write the value out where it is needed.")
        if event.ctag is not None:
            tag = str(event.ctag).replace("tag:yaml.org,2002:", "!!")
            self._tell(event, f"the tag {tag} is not taken: files are plain data.")

    def _enter(self, event: MappingStartEvent | SequenceStartEvent) -> None:
        mapping = isinstance(event, MappingStartEvent)
        if self._open and self._open[-1].awaits_key:
            self._tell(event, "a key must be plain text.")
        self._open.append(_Open(Placed() if mapping else PlacedList(), event))

    def _leave(self) -> None:
        closed = self._open.pop()
        self._put(closed.data, closed.event)

    def _put(self, value: Any, event: Event) -> None:
        """Put a value where it belongs: it is a key, the value of the key before it, an item, or the whole document."""
        if not self._open:
            self._data = value
            return
        around = self._open[-1]
        if isinstance(around.data, PlacedList):
            around.data.append(value)
            around.data.items_at.append(_mark(event))
        elif around.awaits_key:
            around.key = self._key(event, around)
            around.awaits_key = False
        else:
            self._put_under_key(value, event, around)

    def _key(self, event: Event, around: _Open) -> str | None:
        if not isinstance(event, ScalarEvent):
            return None
        key = str(event.value)
        if key in around.data:
            self._tell(event, f"'{key}' stands here twice; keep one of them.")
            return None
        if key == "<<" and event.style is None:
            self._tell(event, "merge keys (<<) are not taken: write the values out where they are needed.")
            return None
        around.key_event = event
        return key

    def _put_under_key(self, value: Any, event: Event, around: _Open) -> None:
        key, placed = around.key, around.data
        around.awaits_key = True
        if key is None:
            return
        before = around.value_event
        if before is not None and value is None and _is_decimal_comma(before, around.key_event):
            # {from: 3,5 GHz} reads as {from: 3, "5 GHz": null}: put back together, for the quantity's own message.
            placed[around.last_key] = f"{before.value},{key}"
            return
        placed[key] = value
        placed.keys_at[key] = _mark(around.key_event)
        # An empty value begins where the next thing does: its place is its key's.
        placed.values_at[key] = _mark(event if event.start_mark.index != event.end_mark.index else around.key_event)
        around.last_key, around.value_event = key, event if isinstance(event, ScalarEvent) else None

    def _tell(self, event: Event, message: str) -> None:
        self._source.problems.append(Problem(self._source.file, *_mark(event), message))


class _Open:
    """A mapping or list that is being read."""

    def __init__(self, data: Placed | PlacedList, event: Event) -> None:
        self.data: Any = data
        self.event = event
        self.awaits_key = isinstance(data, Placed)
        self.key: str | None = None
        self.key_event: Any = None
        self.last_key = ""
        self.value_event: Any = None


def _is_decimal_comma(before: Any, key: Any) -> bool:
    """Whether a value such as 3 and the key after it, 5 GHz, were meant as one number with a decimal comma."""
    touching = before.end_mark.line == key.start_mark.line and before.end_mark.column + 1 == key.start_mark.column
    plain = before.style is None and key.style is None
    return bool(touching and plain and re.fullmatch(r"[-+]?\d+", before.value) and re.match(r"\d", key.value))


def _scalar(event: ScalarEvent) -> Any:
    text = str(event.value)
    if event.style is not None:
        return text
    if text in _NULL:
        return None
    if text in _SWITCH:
        return _SWITCH[text]
    if _INTEGER.fullmatch(text):
        return int(text)
    return float(text) if _FLOAT.fullmatch(text) else text
