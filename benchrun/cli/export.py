"""benchrun export: results of a run in files for other programs."""

from __future__ import annotations

from pathlib import Path

import click

from benchrun.cli.options import run_argument, to_option


@click.command()
@run_argument
@click.option("--as", "as_", required=True, type=click.Choice(["touchstone", "csv"]), help="Form of the files.")
@to_option("Write the files into this folder.")
def command(run: Path, as_: str, to: Path) -> int:
    """Write the results of a run as files for other programs.

    Prints the path of each file.
    """
    from benchrun import flow
    from benchrun.cli.streams import say_path

    for path in flow.export(run, as_, to):
        say_path(path)
    return 0
