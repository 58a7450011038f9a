"""benchrun report: a run on one page that opens offline."""

from __future__ import annotations

from pathlib import Path

import click

from benchrun.cli.options import FILE, run_argument


@click.command()
@run_argument
@click.option("--to", type=FILE, metavar="FILE", help="Write the page to this file. Otherwise report.html in the run.")
def command(run: Path, to: Path | None) -> int:
    """Write the report of a run: one HTML file that opens offline.

    Made from the archive alone, also of a run that failed or was stopped. Prints the path of the file. Needs the extra
    packages that `pip install 'benchrun[report]'` brings.
    """
    from benchrun import flow
    from benchrun.cli.streams import say_path

    say_path(flow.report(run, to))
    return 0
