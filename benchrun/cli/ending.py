"""How a command ends: every way out becomes one clear message and one of the documented exit codes."""

from __future__ import annotations

import os
import signal
import sys
import tempfile
import traceback
from collections.abc import Callable, Sequence
from pathlib import Path

import click

from benchrun.cli.application import application
from benchrun.cli.streams import OutputError, columns, guard_standard_streams, say, say_path, talk
from benchrun.errors import BenchrunError, DiskError, FileProblemsError, InputError, Problem, StoppedError, UnsafeError

DEBUG_VARIABLE = "BENCHRUN_DEBUG"


def run_to_end(arguments: Sequence[str]) -> int:
    """Run one command and return its exit code; whatever happens has been said by then."""
    guard_standard_streams()
    _end_in_order_on_signals()
    try:
        code = application.main(list(arguments), prog_name="benchrun", standalone_mode=False)
        sys.stdout.flush()
    except (Exception, KeyboardInterrupt) as error:  # nothing but the interpreter's own ways out passes here
        return report(error)
    return code if isinstance(code, int) else 0


def report(error: BaseException) -> int:
    """Say what went wrong, to the person who can mend it, and return the exit code."""
    code = BenchrunError.exit_code
    match error:
        case click.ClickException():
            error.show()
            code = InputError.exit_code
        case KeyboardInterrupt() | click.Abort():
            talk("Stopped.")
            code = StoppedError.exit_code
        case OutputError():
            talk(f"Standard output could not be written: {error}.")
            code = DiskError.exit_code
        case FileProblemsError():
            report_problems(error.problems, talk)
            code = error.exit_code
        case BenchrunError():
            talk(_sentence(str(error)), alarm=isinstance(error, UnsafeError))
            code = error.exit_code
        case _:  # whatever is none of these is our own defect
            report_defect(error)
    if (folder := _run_folder(error)) is not None:
        if columns(err=True) and _can_be_taken_up(error):  # advice for a person; scripts have the exit code
            talk(f"`benchrun resume {folder}` goes on with it.")
        say_path(folder)
    return code


def _sentence(text: str) -> str:
    """Return a message with the full stop that it may lack: rooms below put messages together without."""
    return text if text.endswith((".", "?", ":")) else f"{text}."


def _run_folder(error: BaseException) -> Path | None:
    """Return the run folder in which everything is that was committed before the error; None where there is none."""
    folder = getattr(error, "folder", None) or getattr(error.__cause__, "folder", None)  # click's Abort has a cause
    return folder if isinstance(folder, Path) else None


def _can_be_taken_up(error: BaseException) -> bool:
    """Whether a run ended early, and safe: how it ended is known, and its readings are not all there."""
    outcome = getattr(error, "outcome", None)
    return outcome is not None and outcome.state in ("stopped", "failed")


def report_problems(problems: Sequence[Problem], line: Callable[[str], None] = say) -> None:
    """Print each mistake with its position, and how many there are."""
    for problem in problems:
        line(str(problem))
    line(f"{len(problems)} mistake{'' if len(problems) == 1 else 's'}. Nothing was switched on.")


def report_defect(error: BaseException) -> None:
    """Own up to a defect: one line, and the traceback in a file (on the terminal where BENCHRUN_DEBUG is set)."""
    details = "".join(traceback.format_exception(error))
    name = " ".join(f"{type(error).__name__}: {error}".split())
    if os.environ.get(DEBUG_VARIABLE):
        print(details, file=sys.stderr)
        talk(f"A defect of benchrun itself: {name}. Please report it with the lines above.")
        return
    place = _keep(details, _run_folder(error))
    where = f"the file {place}" if place else f"what {DEBUG_VARIABLE}=1 shows"
    talk(f"A defect of benchrun itself: {name}. Please report it together with {where}.")


def _keep(details: str, run_folder: Path | None) -> Path | None:
    """Write the traceback where it can be found again: the run folder, else the temporary folder."""
    for folder in (run_folder, Path(tempfile.gettempdir())):
        try:
            handle, name = tempfile.mkstemp(prefix="benchrun-defect-", suffix=".txt", dir=folder, text=True)
        except OSError:
            continue
        with os.fdopen(handle, "w", encoding="utf-8", errors="backslashreplace") as file:
            file.write(details)
        return Path(name)
    return None


def _end_in_order_on_signals() -> None:
    """Let SIGTERM, and a terminal that goes away, end a command as Ctrl-C does: everything is closed in order."""
    for name in ("SIGTERM", "SIGHUP", "SIGBREAK"):
        number = getattr(signal, name, None)
        if number is not None and signal.getsignal(number) is signal.SIG_DFL:  # the SIG_IGN of nohup stays
            signal.signal(number, signal.default_int_handler)
