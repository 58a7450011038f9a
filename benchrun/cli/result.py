"""What rehearse, run and derive print when they end: the summary, what to know about it, and the run folder last."""

from __future__ import annotations

from typing import TYPE_CHECKING

from benchrun.cli.documents import record_lines
from benchrun.cli.streams import columns, say, say_path, talk

if TYPE_CHECKING:
    from benchrun.flow import RunResult


def show_result(result: RunResult) -> int:
    """Print a result, its folder on the last line of standard output, and return its exit code."""
    if columns(err=True):
        talk()  # on a terminal, a blank line below what was said on the way
    for line in record_lines(result.table, columns()):
        say(line)
    for note in result.notes:
        say(note)
    if result.message:
        talk(result.message)
    say_path(result.folder)
    return result.exit_code
