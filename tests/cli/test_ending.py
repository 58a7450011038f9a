"""Every way out: one clear message, the documented exit code, no traceback unless asked for."""

from __future__ import annotations

import re
import tempfile
from pathlib import Path
from types import SimpleNamespace

import click
import pytest

from benchrun import errors
from benchrun.cli.application import COMMANDS, EXIT_CODES
from benchrun.cli.ending import report
from benchrun.errors import StoppedError


def fail_with(error):
    def fail(*_, **__):
        raise error

    return fail


def subclasses(kind):
    for child in kind.__subclasses__():
        yield child
        yield from subclasses(child)


@pytest.mark.parametrize(
    "kind", sorted(set(subclasses(errors.BenchrunError)) - {errors.FileProblemsError}, key=lambda k: k.__name__)
)
def test_each_of_our_errors_is_its_message_and_its_exit_code(flow, benchrun_command, kind):
    flow.show = fail_with(kind("the pump did not answer"))
    ended = benchrun_command("show", "runs/x")
    assert (ended.code, ended.out, ended.err) == (kind.exit_code, "", "the pump did not answer.\n")


def test_each_exit_code_is_documented():
    documented = {int(code) for code in re.findall(r"^ +(\d) ", EXIT_CODES, re.MULTILINE)}
    assert documented == {0} | {kind.exit_code for kind in [errors.BenchrunError, *subclasses(errors.BenchrunError)]}


@pytest.mark.parametrize("error", [KeyboardInterrupt(), click.Abort()])
def test_a_person_who_stops_is_exit_4(flow, benchrun_command, error):
    flow.show = fail_with(error)
    ended = benchrun_command("show", "runs/x")
    assert (ended.code, ended.err.strip()) == (4, "Stopped.")


def test_a_defect_is_one_line_and_its_traceback_is_kept(flow, benchrun_command, monkeypatch, tmp_path):
    monkeypatch.setattr(tempfile, "tempdir", str(tmp_path))
    monkeypatch.delenv("BENCHRUN_DEBUG", raising=False)
    flow.show = fail_with(KeyError("gate\nvoltage"))
    ended = benchrun_command("show", "runs/x")
    (kept,) = tmp_path.iterdir()
    assert ended.code == 1
    assert len(ended.err.splitlines()) == 1
    assert "report" in ended.err
    assert "KeyError" in ended.err
    assert str(kept) in ended.err
    assert "Traceback" not in ended.err
    assert "Traceback" in kept.read_text(encoding="utf-8")


def test_a_defect_in_a_run_is_kept_in_the_run_folder(flow, benchrun_command, monkeypatch, tmp_path):
    monkeypatch.delenv("BENCHRUN_DEBUG", raising=False)
    error = RuntimeError("x")
    error.folder = tmp_path
    flow.show = fail_with(error)
    ended = benchrun_command("show", "runs/x")
    assert str(tmp_path) in ended.err
    assert ended.out == f"{tmp_path}\n"
    assert len(list(tmp_path.iterdir())) == 1


def test_a_defect_that_cannot_be_kept_still_says_what_to_do(flow, benchrun_command, monkeypatch, tmp_path):
    monkeypatch.setattr(tempfile, "tempdir", str(tmp_path / "gone"))
    monkeypatch.delenv("BENCHRUN_DEBUG", raising=False)
    flow.show = fail_with(RuntimeError("x"))
    ended = benchrun_command("show", "runs/x")
    assert ended.code == 1
    assert "BENCHRUN_DEBUG=1" in ended.err


def test_a_defect_shows_its_traceback_where_that_is_asked_for(flow, benchrun_command, monkeypatch, tmp_path):
    monkeypatch.setattr(tempfile, "tempdir", str(tmp_path))
    monkeypatch.setenv("BENCHRUN_DEBUG", "1")
    flow.show = fail_with(RuntimeError("x"))
    ended = benchrun_command("show", "runs/x")
    assert ended.code == 1
    assert "Traceback" in ended.err
    assert not list(tmp_path.iterdir())


@pytest.mark.parametrize(
    "arguments", [["frob"], ["rehearse", "x.yaml"], ["run"], ["check"], ["rehearse", "x", "--to", "y", "--seed", "-1"]]
)
def test_a_wrong_command_line_is_wrong_input(benchrun_command, arguments):
    ended = benchrun_command(*arguments)
    assert ended.code == 2
    assert ended.err
    assert ended.out == ""


def test_every_command_is_listed_and_has_help(benchrun_command):
    listed = benchrun_command("--help").out
    for name in COMMANDS:
        assert re.search(rf"^  {name} +\S", listed, re.MULTILINE)
        assert benchrun_command(name, "--help").code == 0
    assert "..." not in re.sub(r"Usage.*", "", listed)  # no summary is cut
    modules = {path.stem for path in (Path(__file__).parents[2] / "benchrun/cli").glob("*.py")}
    assert set(COMMANDS) <= modules


@pytest.mark.parametrize(
    ("state", "terminal", "told"),
    [("stopped", 80, True), ("failed", 80, True), ("unsafe", 80, False), ("failed", None, False), (None, 80, False)],
)
def test_on_a_terminal_a_run_that_ended_early_is_told_how_to_go_on(
    tmp_path: Path, capsys: pytest.CaptureFixture[str], monkeypatch: pytest.MonkeyPatch, state: str | None,
    terminal: int | None, told: bool,
) -> None:  # fmt: skip
    """Not where the bench must be looked at first, and not in a script's way."""
    error = StoppedError("stopped by Ctrl-C.")
    error.__dict__["folder"] = tmp_path
    if state is not None:
        error.__dict__["outcome"] = SimpleNamespace(state=state)
    monkeypatch.setattr("benchrun.cli.ending.columns", lambda **_how: terminal)
    assert report(error) == StoppedError.exit_code
    said = capsys.readouterr()
    assert (f"`benchrun resume {tmp_path}` goes on with it." in said.err) is told
    assert said.out == f"{tmp_path}\n"


def test_a_broken_pipe_that_is_not_standard_output_is_a_defect_and_said(flow, benchrun_command, monkeypatch, tmp_path):
    monkeypatch.setattr(tempfile, "tempdir", str(tmp_path))
    flow.show = fail_with(BrokenPipeError(32, "Broken pipe"))
    ended = benchrun_command("show", "runs/x")
    assert ended.code == 1
    assert "A defect of benchrun itself: RuntimeError: BrokenPipeError: [Errno 32] Broken pipe" in ended.err
