"""The command line in this process, against a flow that the test hands in."""

from __future__ import annotations

import signal
import sys
from collections.abc import Callable, Iterator
from dataclasses import dataclass
from types import SimpleNamespace
from typing import Any

import pytest

import benchrun


@dataclass
class Ended:
    """What a command left behind."""

    code: int
    out: str
    err: str


@pytest.fixture
def flow(monkeypatch: pytest.MonkeyPatch) -> SimpleNamespace:
    """A stand-in for benchrun.flow: tests set the functions that they expect to be called."""
    fake = SimpleNamespace()
    monkeypatch.setattr(benchrun, "flow", fake, raising=False)
    monkeypatch.setitem(sys.modules, "benchrun.flow", fake)
    return fake


@pytest.fixture
def benchrun_command(
    capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch
) -> Iterator[Callable[..., Ended]]:
    """Run a command line and return how it ended; signal handlers are put back."""
    from benchrun.cli.ending import run_to_end

    handlers = {number: signal.getsignal(number) for number in (signal.SIGTERM, signal.SIGHUP)}
    monkeypatch.setattr(sys, "stdout", sys.stdout)
    monkeypatch.setattr(sys, "stderr", sys.stderr)

    def run(*arguments: Any) -> Ended:
        code = run_to_end([str(argument) for argument in arguments])
        written = capsys.readouterr()
        return Ended(code, written.out, written.err)

    yield run
    for number, handler in handlers.items():
        signal.signal(number, handler)
