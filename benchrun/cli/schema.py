"""benchrun schema: the JSON Schema with which an editor checks the files that people write."""

from __future__ import annotations

import click


@click.command()
@click.argument("kind", type=click.Choice(["bench", "recipe", "dialect", "kit"]))
def command(kind: str) -> int:
    """Print the JSON Schema of a KIND of file, for editors."""
    from benchrun import flow
    from benchrun.cli.streams import say_json

    say_json(flow.schema(kind))
    return 0
