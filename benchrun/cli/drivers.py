"""benchrun drivers: what is installed, and which package brought it."""

from __future__ import annotations

import click

from benchrun.cli.options import json_option


@click.command()
@json_option
def command(as_json: bool) -> int:
    """List the installed drivers and where they come from."""
    from benchrun import flow
    from benchrun.cli.documents import record_lines
    from benchrun.cli.streams import columns, say, say_json

    records = flow.drivers()
    if as_json:
        say_json(records)
    else:
        say("\n".join(record_lines(records, columns())) or "No drivers. Install benchrun again: it brings its own.")
    return 0
