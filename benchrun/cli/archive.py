"""benchrun archive: looking after the archives of runs."""

from __future__ import annotations

from pathlib import Path

import click

from benchrun.cli.options import FILE, run_argument


@click.group(context_settings={"help_option_names": ["-h", "--help"]})
def command() -> None:
    """Check, recover and hand on the archives of runs."""


@command.command()
@run_argument
def check(run: Path) -> int:
    """Say everything that is wrong with a run's archive.

    RUN is a run folder, its archive, or a file that `archive pack` wrote. The exit code is 0 where it is sound, and 5
    where it is not.
    """
    from benchrun import flow
    from benchrun.cli.streams import say
    from benchrun.errors import BenchError

    found = flow.check_archive(run)
    for problem in found.problems:
        say(f"{run}: {problem}")
    if found.problems:
        say(f"{len(found.problems)} problem{'' if len(found.problems) == 1 else 's'}.")
        return BenchError.exit_code
    say(f"{run}: sound, {found.holds}.")
    return 0


@command.command()
@run_argument
def repair(run: Path) -> int:
    """Recover every readable reading of a damaged archive.

    What is recovered goes into a new run folder beside RUN, which is left as it is. Says what was lost. The last line
    of standard output is the new run folder.
    """
    from benchrun import flow
    from benchrun.cli.streams import say, say_path

    repaired = flow.repair_archive(run)
    say(f"{repaired.readings} readings recovered; {repaired.planned} were planned.")
    for lost in repaired.lost:
        say(f"Lost: {lost}.")
    if not repaired.lost:
        say("Nothing was lost.")
    say_path(repaired.folder)
    return 0


@command.command()
@run_argument
@click.option("--to", required=True, type=FILE, metavar="FILE", help="Write this file, a zip. None is overwritten.")
def pack(run: Path, to: Path) -> int:
    """Put a run into one file to hand on.

    The file holds the archive, the results, and a manifest with the SHA-256 of each; unpacked, it is a run folder
    again. Prints the path of the file.
    """
    from benchrun import flow
    from benchrun.cli.streams import say_path

    say_path(flow.pack_run(run, to))
    return 0
