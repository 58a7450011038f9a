"""Standard output and error that never take a measurement down: closed pipes, small encodings, narrow terminals.

A reader that has seen enough (`benchrun show RUN | head`) or a terminal that has gone away is no failure: what is
written afterwards is dropped, and the command keeps its exit code. A full disk behind standard output is a failure.
"""

from __future__ import annotations

import contextlib
import errno
import json
import os
import sys
import textwrap
from collections.abc import Callable
from io import TextIOWrapper
from pathlib import Path
from typing import Any, TextIO, cast

import click

#: No reader any more: a closed pipe (EPIPE; EINVAL on Windows) or a terminal that hung up (EIO).
_NO_READER = {errno.EPIPE, errno.EINVAL, errno.EIO}


class OutputError(Exception):
    """Standard output could not be written for another reason than a reader that left."""


class GuardedStream:
    """A text stream that drops everything once its reader has gone; everything else is the wrapped stream's."""

    def __init__(self, stream: TextIO, *, drop_all: bool) -> None:
        self._stream = stream
        self._drop_all = drop_all
        self._gone = False

    def __getattr__(self, name: str) -> Any:
        return getattr(self._stream, name)

    def write(self, text: str) -> int:
        """Write `text`, or drop it where nobody reads. Raises OutputError where a disk is full."""
        self._guarded(lambda: self._stream.write(text))
        return len(text)

    def flush(self) -> None:
        """Flush, or do nothing where nobody reads. Raises OutputError where a disk is full."""
        self._guarded(self._stream.flush)

    def isatty(self) -> bool:
        """Whether a person reads along."""
        return not self._gone and self._stream.isatty()

    def _guarded(self, action: Callable[[], object]) -> None:
        if self._gone:
            return
        try:
            action()
        except OSError as error:
            self._gone = True
            self._sink()
            if not self._drop_all and error.errno not in _NO_READER:
                raise OutputError(error.strerror or str(error)) from error

    def _sink(self) -> None:
        """Point the descriptor at nothing, so that what is still buffered cannot fail again when Python leaves."""
        with contextlib.suppress(OSError, ValueError), Path(os.devnull).open("wb") as nothing:
            os.dup2(
                nothing.fileno(), self._stream.fileno()
            )  # fails where no descriptor is behind: nothing is buffered then


def guard_standard_streams() -> None:
    """Put a GuardedStream around standard output and standard error, once, and let no character be unprintable."""
    for name in ("stdout", "stderr"):
        stream = getattr(sys, name) or Path(os.devnull).open("w")  # noqa: SIM115  None where the caller closed it
        if isinstance(stream, GuardedStream):
            continue
        if isinstance(stream, TextIOWrapper):
            utf8 = stream.encoding.lower().replace("-", "") == "utf8"
            stream.reconfigure(errors="surrogateescape" if utf8 else "backslashreplace")  # paths as they are, if it can
        setattr(sys, name, cast(TextIO, GuardedStream(stream, drop_all=name == "stderr")))


def say(text: str = "", *, alarm: bool = False) -> None:
    """Print a result: a line on standard output, folded to a terminal; an alarm in red where colour is wanted."""
    print(_coloured(folded(text), sys.stdout) if alarm else folded(text), flush=True)


def talk(text: str = "", *, alarm: bool = False) -> None:
    """Print talk: a line on standard error, folded to a terminal; an alarm in red where colour is wanted."""
    text = folded(text, err=True)
    print(_coloured(text, sys.stderr) if alarm else text, file=sys.stderr, flush=True)


def _coloured(text: str, stream: TextIO) -> str:
    """Return `text` in bold red on a terminal that shows colour, unless NO_COLOR is set (https://no-color.org)."""
    plain = os.environ.get("NO_COLOR") or os.environ.get("TERM") == "dumb" or os.name == "nt"
    return click.style(text, fg="red", bold=True) if stream.isatty() and not plain else text


def say_path(path: Path) -> None:
    """Print a path as a result, for scripts: on a line of its own, never folded."""
    print(path, flush=True)


def say_json(document: object) -> None:
    """Print a result as JSON, for scripts: never folded; numbers that are not finite as null, which JSON knows."""
    finite = json.loads(json.dumps(document, default=_plain), parse_constant=lambda _: None)
    print(json.dumps(finite, indent=2), flush=True)


def _plain(value: object) -> object:
    """Return what JSON does not know in what it knows: NumPy's numbers and arrays as lists, the rest as text."""
    if isinstance(value, complex):
        return [value.real, value.imag]
    return value.tolist() if hasattr(value, "tolist") else str(value)


def columns(*, err: bool = False) -> int | None:
    """Return the columns of the terminal behind standard output (or error); None where there is no terminal."""
    stream = sys.stderr if err else sys.stdout
    if not stream.isatty():
        return None
    try:
        return os.get_terminal_size(stream.fileno()).columns or 80  # 0: a terminal that does not know its size
    except OSError:
        return 80


def folded(text: str, *, err: bool = False) -> str:
    """Fold long lines to the terminal, continued with four spaces; unchanged where there is no terminal."""
    width = columns(err=err)
    return text if width is None else "\n".join(_fold(line, max(width, 20)) for line in text.split("\n"))


def _fold(line: str, width: int) -> str:
    indent = line[: len(line) - len(line.lstrip())] + "    "
    return "\n".join(
        textwrap.wrap(line, width, subsequent_indent=indent, break_long_words=False, break_on_hyphens=False)
    )
