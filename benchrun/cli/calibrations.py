"""benchrun calibrations: which calibrations are there, and what they are good for."""

from __future__ import annotations

from pathlib import Path

import click

from benchrun.cli.options import FOLDER, json_option


@click.command()
@click.argument("folder", type=FOLDER, default="runs")
@json_option
def command(folder: Path, as_json: bool) -> int:
    """List the calibrations that are there.

    Looks into the runs in FOLDER (default: runs).
    """
    from benchrun import flow
    from benchrun.cli.documents import record_lines
    from benchrun.cli.streams import columns, say, say_json

    records = flow.calibrations(folder)
    if as_json:
        say_json(records)
    else:
        say("\n".join(record_lines(records, columns())) or f"No calibration in {folder}.")
    return 0
