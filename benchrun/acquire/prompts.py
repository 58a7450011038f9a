"""Asking the operator: at a terminal, in a rehearsal (which answers itself), or not at all."""

from __future__ import annotations

import shutil
import sys
import textwrap
from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal, Protocol, TextIO

from benchrun.errors import InputError, StoppedError

Answer = Literal["proceed", "skip", "stop"]
_ANSWERS: dict[str, Answer] = {"": "proceed", "s": "skip", "skip": "skip", "q": "stop", "quit": "stop", "stop": "stop"}
_QUESTION = "Enter to read, s to skip, q to stop > "
WIDTH = 100


@dataclass(frozen=True, slots=True)
class Prompt:
    """What the operator is asked to do, what to beware of, and what was read back just now ("RF off, ...").

    `connect` is (plane, what) where something is to be connected.
    """

    text: str
    cautions: tuple[str, ...]
    confirmed: str
    connect: tuple[str, str] | None = None


class Prompter(Protocol):
    """Somebody who can be asked."""

    @property
    def available(self) -> bool:
        """Whether anybody is there to answer."""

    def ask(self, prompt: Prompt) -> Answer:
        """Show the prompt, wait for the answer."""


class TerminalPrompter:
    """Asks at the terminal: the text goes to standard error, the answer comes from standard input."""

    def __init__(self, source: TextIO | None = None, sink: TextIO | None = None) -> None:
        self._source = source
        self._sink = sink

    @property
    def _in(self) -> TextIO:
        return sys.stdin if self._source is None else self._source

    @property
    def _out(self) -> TextIO:
        return sys.stderr if self._sink is None else self._sink

    @property
    def available(self) -> bool:
        """Whether both ends are a terminal."""
        return all(stream is not None and not stream.closed and stream.isatty() for stream in (self._in, self._out))

    def ask(self, prompt: Prompt) -> Answer:
        """Show the prompt and return the answer; the end of input means stop. What was typed before is none."""
        print(shown(prompt), file=self._out)
        _forget_typed(self._in)
        while True:
            print(_folded([prompt.confirmed], _width()), file=self._out)
            print(_QUESTION, end="", file=self._out, flush=True)
            try:
                line = self._in.readline()
            except KeyboardInterrupt:
                print(file=self._out)  # what is said next begins on a line of its own
                raise
            if not line:
                return "stop"
            answer = _ANSWERS.get(line.strip().lower())
            if answer is not None:
                return answer
            print(f"'{line.strip()}' is none of Enter, s and q.", file=self._out)


class RehearsalPrompter:
    """Answers itself, and makes the connection that was asked for in the simulated world."""

    available = True

    def __init__(self, connect: Callable[[str, str], None], show: Callable[[str], None] = lambda _text: None) -> None:
        self._connect = connect
        self._show = show

    def ask(self, prompt: Prompt) -> Answer:
        """Connect what is asked for and go on."""
        self._show(prompt.text)
        if prompt.connect is not None:
            self._connect(*prompt.connect)
        return "proceed"


class RefusingPrompter:
    """Nobody is there."""

    available = False

    def ask(self, prompt: Prompt) -> Answer:
        """Refuse: raises StoppedError. A schedule with prompts never gets this far."""
        raise StoppedError(f"nobody is there to be asked: {prompt.text}")


def require_somebody(prompts: int, prompter: Prompter) -> None:
    """Raise InputError where there are prompts and nobody to answer: call it before anything is switched on."""
    if prompts and not prompter.available:
        raise InputError(
            f"the recipe asks the operator {prompts} time{'' if prompts == 1 else 's'}, and there is no terminal to "
            "ask at. Nothing was switched on. Run it from a terminal, or leave its connect and ask steps out"
        )


def shown(prompt: Prompt) -> str:
    """Return the text and cautions of a prompt, folded."""
    return _folded([prompt.text, *prompt.cautions], _width())


def _folded(lines: list[str], width: int) -> str:
    return "\n".join(part for line in lines for part in textwrap.wrap(line, width) or [""])


def _width() -> int:
    """Return how wide text may be: the terminal, and never wider than is good to read."""
    return min(WIDTH, shutil.get_terminal_size((WIDTH, 24)).columns)


def _forget_typed(stream: TextIO) -> None:
    """Drop what was typed before the question was there to be read."""
    if not stream.isatty():
        return
    if sys.platform == "win32":  # pragma: no cover  only there
        import msvcrt

        while msvcrt.kbhit():
            msvcrt.getwch()
    else:
        import termios

        termios.tcflush(stream.fileno(), termios.TCIFLUSH)
