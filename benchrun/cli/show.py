"""benchrun show: what a run holds."""

from __future__ import annotations

from pathlib import Path

import click

from benchrun.cli.options import json_option, run_argument


@click.command()
@run_argument
@json_option
def command(run: Path, as_json: bool) -> int:
    """Show what a run holds."""
    from benchrun import flow
    from benchrun.cli.documents import document_lines
    from benchrun.cli.streams import columns, say, say_json

    document = flow.show(run)
    if as_json:
        say_json(document)
    else:
        say("\n".join(document_lines(document, columns())))
    return 0
