"""YAML files that people write: read as data with the place of every key and value, and checked against a model, all at once.

Files are data. YAML 1.2 safe scalars only; anchors, aliases, explicit tags and repeated keys are refused, and size, depth and number
of nodes are bounded, so that no file can run code or fill the memory. Only a syntax error ends early.
"""

from __future__ import annotations

import difflib
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any, TypeVar

from pydantic import BaseModel, ConfigDict, ValidationError, ValidationInfo, model_validator
from ruamel.yaml import YAML
from ruamel.yaml.error import MarkedYAMLError, YAMLError
from ruamel.yaml.nodes import MappingNode, Node, ScalarNode, SequenceNode

from benchrun.errors import Problem

MAX_BYTES = 1_000_000
MAX_DEPTH = 40
MAX_NODES = 100_000

Mark = tuple[int, int]
Path_ = tuple[str | int, ...]
_NO_MARK: Mark = (0, 0)
_TAGS = {f"tag:yaml.org,2002:{name}" for name in ("str", "int", "float", "bool", "null", "map", "seq")}


class Placed(dict[str, Any]):
    """A mapping of a file that knows where its keys and values stand (line and column, from 1)."""

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

    def problem(self, where: Path_ | Mark, message: str, *, at_key: bool = False) -> Problem:
        """Return a Problem at a path into the data: at the value, or at its key."""
        line, column = self.mark(where, at_key=at_key)
        return Problem(self.file, line, column, message)

    def mark(self, path: Path_, *, at_key: bool = False) -> Mark:
        """Return line and column of the value (or key) at `path`; of the nearest place that exists where it does not."""
        here, mark = self.data, (1, 1)
        for position, step in enumerate(path):
            last = position == len(path) - 1
            if isinstance(here, Placed) and step in here:
                mark = (here.keys_at if at_key and last else here.values_at)[str(step)]
                here = here[str(step)]
            elif isinstance(here, PlacedList) and isinstance(step, int) and step < len(here):
                mark, here = here.items_at[step], here[step]
        return mark


class Strict(BaseModel):
    """Base of every model of a file: frozen, hyphens in the file for underscores here, unknown keys told with the nearest known."""

    model_config = ConfigDict(
        extra="forbid", frozen=True, populate_by_name=True, alias_generator=lambda name: name.replace("_", "-"), arbitrary_types_allowed=True
    )

    @model_validator(mode="before")
    @classmethod
    def _report_unknown_keys(cls, given: Any, info: ValidationInfo) -> Any:
        """Tell unknown keys with their places and leave them out, so that the rest is checked as well."""
        unknown_keys = (info.context or {}).get("unknown_keys")
        if unknown_keys is None or not isinstance(given, Placed):
            return given
        known = [f.alias or name for name, f in cls.model_fields.items()]
        strangers = [key for key in given if key not in known]
        for key in strangers:
            unknown_keys.append((given.keys_at[key], _unknown(key, known)))
        return {key: value for key, value in given.items() if key in known} if strangers else given


def _unknown(key: str, known: Sequence[str]) -> str:
    near = difflib.get_close_matches(key, known, n=1, cutoff=0.6)
    meant = f" Did you mean '{near[0]}'?" if near else ""
    return f"'{key}' is not known here.{meant} Known: {', '.join(known) or 'nothing'}."


Checked = TypeVar("Checked", bound=BaseModel)


def read_source(path: Path) -> Source:
    """Read a YAML file. Never raises for what stands in it or for a missing file: see .problems; .data is None where it cannot be read."""
    source = Source(str(path))
    try:
        raw = path.read_bytes()
    except FileNotFoundError:
        return _whole(source, "there is no such file. Check the name and the folder.")
    except OSError as error:
        return _whole(source, f"cannot be read ({error.strerror or error}).")
    if len(raw) > MAX_BYTES:
        return _whole(source, f"is larger than {MAX_BYTES} bytes; no file of this kind is.")
    try:
        source.text = raw.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        return _whole(source, f"is not UTF-8 text (byte {error.start}). Save it as UTF-8.")
    return _parsed(source)


def read_text(text: str, file: str) -> Source:
    """Read YAML from a text that came from a file called `file`."""
    return _parsed(Source(file, text))


def _whole(source: Source, message: str) -> Source:
    source.problems.append(Problem(source.file, 0, 0, message))
    return source


def _parsed(source: Source) -> Source:
    try:
        node = YAML(typ="safe", pure=True).compose(source.text)
        if node is None:
            return _whole(source, "is empty.")
        source.data = _Builder(source).build(node, 0)
    except MarkedYAMLError as error:
        mark = error.problem_mark or error.context_mark
        line, column = (mark.line + 1, mark.column + 1) if mark else _NO_MARK
        source.problems.append(Problem(source.file, line, column, f"not YAML: {error.problem or error.context}."))
    except _TooMuchError as error:
        source.problems.append(error.problem)
    except (YAMLError, ValueError, RecursionError, AttributeError, TypeError, KeyError, IndexError, AssertionError) as error:
        # The library raises its own and plain errors for odd characters and deep nesting; the text is at fault in each case.
        detail = str(error).splitlines()[0] if str(error) else type(error).__name__
        return _whole(source, f"cannot be read as YAML ({detail}).")
    return source


class _TooMuchError(Exception):
    def __init__(self, problem: Problem) -> None:
        super().__init__(str(problem))
        self.problem = problem


class _Builder:
    """Turns composed nodes into plain data with marks."""

    def __init__(self, source: Source) -> None:
        self._source = source
        self._nodes = 0

    def build(self, node: Node, depth: int) -> Any:
        self._nodes += 1
        if depth > MAX_DEPTH or self._nodes > MAX_NODES:
            limit = f"nested deeper than {MAX_DEPTH}" if depth > MAX_DEPTH else f"more than {MAX_NODES} values"
            raise _TooMuchError(self._at(node, f"{limit}; no file of this kind is."))
        if node.anchor is not None:
            self._tell(node, f"anchors and aliases ('&{node.anchor}') are not taken: write the value out where it is needed.")
        if str(node.tag) not in _TAGS:
            self._tell(node, f"the tag {node.tag} is not taken: files are plain data.")
            return None
        if isinstance(node, MappingNode):
            return self._mapping(node, depth)
        if isinstance(node, SequenceNode):
            return self._sequence(node, depth)
        return self._scalar(node)

    def _mapping(self, node: MappingNode, depth: int) -> Placed:
        placed = Placed()
        for key_node, value_node in node.value:
            key = self._key(key_node)
            if key is None:
                continue
            if key in placed:
                self._tell(key_node, f"'{key}' stands here twice; keep one of them.")
                continue
            placed[key] = self.build(value_node, depth + 1)
            placed.keys_at[key] = _mark(key_node)
            placed.values_at[key] = _mark(value_node)
        return placed

    def _key(self, node: Node) -> str | None:
        if isinstance(node, ScalarNode) and node.anchor is None and str(node.tag) in _TAGS:
            return str(node.value)
        self._tell(node, "a key must be plain text.")
        return None

    def _sequence(self, node: SequenceNode, depth: int) -> PlacedList:
        placed = PlacedList()
        for item in node.value:
            placed.append(self.build(item, depth + 1))
            placed.items_at.append(_mark(item))
        return placed

    def _scalar(self, node: ScalarNode) -> Any:
        kind, text = str(node.tag).rpartition(":")[2], str(node.value)
        if kind == "null":
            return None
        if kind == "bool":
            return text.lower() == "true"
        if kind == "int" and text.lstrip("+-").isdigit() and len(text) < 19:
            return int(text)
        if kind == "float":
            try:
                return float(text)
            except ValueError:
                return text
        return text

    def _at(self, node: Node, message: str) -> Problem:
        return Problem(self._source.file, *_mark(node), message)

    def _tell(self, node: Node, message: str) -> None:
        self._source.problems.append(self._at(node, message))


def _mark(node: Node) -> Mark:
    return node.start_mark.line + 1, node.start_mark.column + 1


def check(
    source: Source, model: type[Checked], within: Path_ = (), data: Any = None, context: Mapping[str, Any] | None = None
) -> tuple[Checked | None, list[Problem]]:
    """Check data of a source against a model: (the model, []) or (None, all its problems with their places).

    `within` is the path of `data` in the source where only a part of it is checked; `context` reaches the fields' own checks.
    """
    unknown_keys: list[tuple[Mark, str]] = []
    checked: Checked | None = None
    problems: list[Problem] = []
    try:
        checked = model.model_validate(source.data if data is None else data, context={**(context or {}), "unknown_keys": unknown_keys})
    except ValidationError as error:
        problems = [_problem(source, within, detail) for detail in error.errors(include_url=False)]
    problems += [Problem(source.file, *mark, message) for mark, message in unknown_keys]
    return (None if problems else checked), _once(problems)


def _once(problems: Iterable[Problem]) -> list[Problem]:
    return sorted(set(problems))


def _problem(source: Source, within: Path_, detail: Mapping[str, Any]) -> Problem:
    path = (*within, *detail["loc"])
    if detail["type"] == "missing":
        return source.problem(path[:-1], f"'{path[-1]}' is missing here.")
    return source.problem(path, _message(detail))


def _message(detail: Mapping[str, Any]) -> str:
    message = str(detail["msg"]).removeprefix("Value error, ")
    if message.startswith("Input should be "):
        message = f"{_shown(detail['input'])} should be {message.removeprefix('Input should be ')}"
    return message if message.endswith((".", "?")) else f"{message}."


def _shown(value: Any) -> str:
    if isinstance(value, Mapping):
        return "this mapping"
    if isinstance(value, list):
        return "this list"
    return repr(value)
