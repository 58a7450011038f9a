"""Exchange n fails, for every n, on a bench of plain objects: RF off, gate after drain, readings there, one message."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import pytest

from benchrun.acquire import Outcome, RehearsalPrompter, Silent, acquire, outcome_of
from benchrun.archive import ArchiveWriter, open_archive
from benchrun.contract.actions import Action, AskAction, ReadAction, SetAction, SettleAction
from benchrun.errors import BenchrunError, DiskError, StoppedError, UnsafeError
from tests.acquire.fake_bench import (
    BENCH,
    FakeBench,
    FakeSchedule,
    Fault,
    capture,
    complains,
    dies,
    interrupts,
    meta,
    no_answer,
    our_defect,
)
from tests.acquire.test_runner import BOTH, STEPS, UP

FAULTS: dict[str, Fault] = {
    "no answer": no_answer,
    "gone for good": dies,
    "error in the queue": complains,
    "Ctrl-C": interrupts,
    "our own defect": our_defect,
}
#: Which exit codes may follow; 0 only where it failed on the way down and was confirmed in the end.
CODES = {
    "no answer": {0, 5},
    "gone for good": {0, 5, 6},
    "error in the queue": {0, 5},
    "Ctrl-C": {0, 4},
    "our own defect": {0, 1},
}


def actions() -> list[Action]:
    """Return a run with everything in it: bias, hops, levels, scalars, a prompt."""
    found: list[Action] = [SetAction((("probe.level", 8.0),)), UP]
    for hz in (2.2e9, 2.3e9):
        found += [
            SetAction((("probe.frequency", hz), ("pump.frequency", hz - 7e6), ("pump.level", -3.0))),
            SettleAction(0.02, BOTH),
            ReadAction("hot", capture(hz), BOTH, ("drain.voltage", "ambient.temperature")),
        ]
    return [
        *found,
        AskAction("Connect the power meter.", (), ("output", "meter")),
        ReadAction("power", None, ("probe",), ("meter.power",)),
    ]


class Story:
    """One run in a folder, and what became of it."""

    def __init__(self, folder: Path, prepare: Callable[[FakeBench], Any]) -> None:
        self.bench = FakeBench()
        self.folder = folder
        self.committed = 0
        self.outcome: Outcome | None = None
        self.error: BaseException | None = None
        prepare(self.bench)
        schedule = FakeSchedule(actions())
        writer = ArchiveWriter.create(folder, replace(meta(), readings_planned=len(schedule)))
        prompter = RehearsalPrompter(self._connect)
        try:
            self.outcome = acquire(
                schedule,
                self.bench,
                BENCH,
                STEPS,
                writer,
                self.bench.clock,
                prompter,
                Silent(),  # type: ignore[arg-type]
            )
        except BaseException as error:
            self.error = error
            self.outcome = outcome_of(error)
        self.committed = writer.readings
        writer.close(self.outcome.state if self.outcome else "failed")

    def _connect(self, _plane: str, _what: str) -> None:
        if not self.bench.dark:
            self.bench.harm.append("the operator was at the bench")

    @property
    def code(self) -> int:
        return getattr(self.error, "exit_code", 1) if self.error else 0


def check(story: Story) -> None:
    """Everything that must hold after any way out."""
    bench, outcome = story.bench, story.outcome
    assert outcome is not None
    assert not bench.harm
    assert isinstance(story.error, UnsafeError) == bool(outcome.unconfirmed) == (outcome.state == "unsafe")
    if not outcome.unconfirmed:
        assert bench.dark
        assert bench.supply_.on == {"gate": False, "drain": False}
    with open_archive(story.folder) as reader:
        assert reader.check() == []
        assert reader.count == story.committed
        assert reader.meta.state == outcome.state
        assert len(reader.log("safe-state")) == 1
        assert len(reader.log("failure")) == (outcome.cause != "")
    if isinstance(story.error, BenchrunError):
        text = str(story.error)
        assert f"{story.committed} of 3 readings are safe in {story.folder / 'archive.sqlite'}." in text
        assert "Made safe" in text
        assert ("NOT CONFIRMED" in text) == bool(outcome.unconfirmed)
        assert "Traceback" not in text


def test_without_a_fault(tmp_path: Path) -> None:
    story = Story(tmp_path, lambda _bench: None)
    check(story)
    assert (story.code, story.committed) == (0, 3)


@pytest.mark.parametrize("kind", FAULTS)
def test_exchange_n_fails_for_every_n(kind: str, tmp_path: Path) -> None:
    whole = Story(tmp_path / "whole", lambda _bench: None).bench.exchanges
    codes = []
    for n in range(whole):
        story = Story(tmp_path / f"{n}", lambda bench, n=n: bench.faults.update({n: FAULTS[kind]}))  # type: ignore[misc]
        check(story)
        codes.append(story.code)
    assert set(codes) == CODES[kind]
    assert codes.count(0) < whole / 3


@pytest.mark.parametrize("kind", ["no answer", "Ctrl-C"])
def test_another_exchange_fails_on_the_way_down(kind: str, tmp_path: Path) -> None:
    whole = Story(tmp_path / "whole", lambda _bench: None).bench.exchanges
    for n in range(10, whole, 17):
        for later in (1, 2, 3, 5, 8):
            faults = {n: no_answer, n + later: FAULTS[kind]}
            story = Story(tmp_path / f"{n}-{later}", lambda bench, faults=faults: bench.faults.update(faults))  # type: ignore[misc]
            check(story)
            assert story.code in (0, 4, 5)


def test_the_disk_fails_at_commit_n(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    commit = ArchiveWriter.commit
    for n in range(3):

        def full(writer: ArchiveWriter, reading: Any, n: int = n) -> None:
            if writer.readings == n:
                raise DiskError(f"{writer.path}: the disk is full")
            commit(writer, reading)

        monkeypatch.setattr(ArchiveWriter, "commit", full)
        story = Story(tmp_path / f"{n}", lambda _bench: None)
        check(story)
        assert (story.code, story.committed) == (5, n)
        assert "the disk is full" in str(story.error)


def test_ctrl_c_is_never_our_defect(tmp_path: Path) -> None:
    story = Story(tmp_path, lambda bench: bench.faults.update({40: interrupts}))
    assert type(story.error) is StoppedError
    assert story.outcome is not None
    assert story.outcome.state == "stopped"
