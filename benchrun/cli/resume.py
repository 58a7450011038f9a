"""benchrun resume: a run that was cut off, taken up at its first missing reading."""

from __future__ import annotations

from pathlib import Path

import click

from benchrun.cli.options import FILE, run_argument
from benchrun.cli.run import CAUTION


@click.command(epilog=CAUTION)
@run_argument
@click.option(
    "--bench",
    type=FILE,
    help="Reach the instruments as this bench file says. All else in it must be what the run began with.",
)
def command(run: Path, bench: Path | None) -> int:
    """Take up a run that was killed, stopped or failed.

    Goes on at the first missing reading and keeps all that are there: a run on the real bench, a rehearsal on simulated
    instruments. Recipe, bench and calibrations are those in the run's archive. Refused where they, the software or the
    instruments have changed since. With a run that is complete, nothing is done. The last line of standard output is
    the run folder.
    """
    from benchrun import flow
    from benchrun.acquire.prompts import TerminalPrompter
    from benchrun.cli.progress import TerminalProgress
    from benchrun.cli.result import show_result

    with TerminalProgress() as listener:
        result = flow.resume(run, bench=bench, listener=listener, prompter=TerminalPrompter())
    return show_result(result)
