"""benchrun check: every mistake in the files that people write, at once, with its position."""

from __future__ import annotations

from pathlib import Path

import click

from benchrun.cli.options import FILE


@click.command()
@click.argument("files", nargs=-1, required=True, type=FILE, metavar="FILE...")
def command(files: tuple[Path, ...]) -> int:
    """Check bench, recipe, kit and dialect files.

    Reports every mistake at once as FILE:LINE:COLUMN. Touches no instrument.
    """
    from benchrun import flow
    from benchrun.cli.ending import report_problems
    from benchrun.cli.streams import say
    from benchrun.errors import FileProblemsError

    problems = flow.check_files(list(files))
    if problems:
        report_problems(problems)
        return FileProblemsError.exit_code
    say(f"{len(files)} file{'' if len(files) == 1 else 's'} checked, no mistakes.")
    return 0
