"""Asking: at a terminal, in a rehearsal, and with nobody there."""

from __future__ import annotations

import io
import os
import time
from collections.abc import Iterator
from typing import TextIO

import pytest

from benchrun.acquire.prompts import (
    WIDTH,
    Prompt,
    RefusingPrompter,
    RehearsalPrompter,
    TerminalPrompter,
    require_somebody,
)
from benchrun.errors import InputError, StoppedError

PROMPT = Prompt(
    "Connect OPEN to the output plane (right-hand side of the coupler).",
    ("Clean, gauge, torque to the connector's value.",),
    "RF off and drain off, read back at 21:14:02.",
    ("output", "open"),
)


def asked(typed: str) -> tuple[str, str]:
    sink = io.StringIO()
    return TerminalPrompter(io.StringIO(typed), sink).ask(PROMPT), sink.getvalue()


def test_everything_is_shown_before_the_question() -> None:
    answer, text = asked("\n")
    assert answer == "proceed"
    assert text == (
        "Connect OPEN to the output plane (right-hand side of the coupler).\n"
        "Clean, gauge, torque to the connector's value.\n"
        "RF off and drain off, read back at 21:14:02.\n"
        "Enter to read, s to skip, q to stop > "
    )


@pytest.mark.parametrize(
    ("typed", "answer"), [("s\n", "skip"), ("Q\n", "stop"), (" skip \n", "skip"), ("stop\n", "stop")]
)
def test_answers(typed: str, answer: str) -> None:
    assert asked(typed)[0] == answer


def test_what_is_no_answer_is_asked_again() -> None:
    answer, text = asked("yes\n\n")
    assert answer == "proceed"
    assert "'yes' is none of Enter, s and q." in text
    assert text.count("read back at 21:14:02") == 2


@pytest.mark.parametrize("typed", ["", "no"])
def test_the_end_of_input_stops(typed: str) -> None:
    assert asked(typed)[0] == "stop"


def test_long_texts_are_folded() -> None:
    sink = io.StringIO()
    TerminalPrompter(io.StringIO("\n"), sink).ask(Prompt("word " * 60, (), "RF off."))
    assert max(map(len, sink.getvalue().splitlines())) <= WIDTH


def test_a_file_is_no_terminal() -> None:
    assert not TerminalPrompter(io.StringIO(), io.StringIO()).available


@pytest.fixture
def terminal() -> Iterator[tuple[int, TextIO]]:
    pty = pytest.importorskip("pty")
    outside, inside = pty.openpty()
    with os.fdopen(inside, "r+b", buffering=0) as raw, io.TextIOWrapper(raw, write_through=True) as text:
        yield outside, text
    os.close(outside)


def test_both_ends_must_be_a_terminal(terminal: tuple[int, TextIO]) -> None:
    _, text = terminal
    assert TerminalPrompter(text, text).available
    assert not TerminalPrompter(text, io.StringIO()).available
    assert not TerminalPrompter(io.StringIO(), text).available


def test_what_was_typed_before_the_question_is_no_answer(terminal: tuple[int, TextIO]) -> None:
    outside, text = terminal
    os.write(outside, b"\n\n\n")  # an impatient operator, one prompt earlier
    time.sleep(0.05)  # until the terminal has it

    class Sink(io.StringIO):
        def flush(self) -> None:
            os.write(outside, b"q\n")

    assert TerminalPrompter(text, Sink()).ask(PROMPT) == "stop"


def test_a_rehearsal_answers_itself() -> None:
    connected: list[tuple[str, str]] = []
    shown: list[str] = []
    prompter = RehearsalPrompter(lambda plane, what: connected.append((plane, what)), shown.append)
    assert prompter.available
    assert prompter.ask(PROMPT) == "proceed"
    assert prompter.ask(Prompt("Look.", (), "")) == "proceed"
    assert connected == [("output", "open")]
    assert shown == [PROMPT.text, "Look."]


def test_nobody_refuses() -> None:
    with pytest.raises(
        InputError, match=r"asks the operator 1 time, and there is no terminal.*Nothing was switched on"
    ):
        require_somebody(1, RefusingPrompter())
    require_somebody(0, RefusingPrompter())
    with pytest.raises(StoppedError):
        RefusingPrompter().ask(PROMPT)


def test_ctrl_c_at_the_question_leaves_its_line() -> None:
    class Interrupted(io.StringIO):
        def readline(self, size: int | None = -1, /) -> str:
            raise KeyboardInterrupt

    sink = io.StringIO()
    with pytest.raises(KeyboardInterrupt):
        TerminalPrompter(Interrupted(), sink).ask(PROMPT)
    assert sink.getvalue().endswith("> \n")


def test_the_text_fits_a_narrow_terminal(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setenv("COLUMNS", "40")
    _, text = asked("\n")
    assert max(len(line) for line in text.splitlines()) <= 40
