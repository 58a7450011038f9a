"""benchrun derive: results from an archive that is there, with another calibration if wanted."""

from __future__ import annotations

from pathlib import Path

import click

from benchrun.cli.options import calibration_option, run_argument


@click.command()
@run_argument
@calibration_option("the one of its newest result stays")
def command(run: Path, calibrations: dict[str, Path]) -> int:
    """Derive and save the results of a run again.

    Works from the archive alone. The new result is numbered and stands beside the old one, which is left as it is.
    """
    from benchrun import flow
    from benchrun.cli.result import show_result

    return show_result(flow.derive_again(run, calibrations))
