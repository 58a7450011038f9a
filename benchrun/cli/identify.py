"""benchrun identify: who answers at an address."""

from __future__ import annotations

import click

from benchrun.cli.options import json_option


@click.command()
@click.argument("address")
@click.option("--backend", default="py", show_default=True, help="VISA backend, as in a bench file.")
@json_option
def command(address: str, backend: str, as_json: bool) -> int:
    """Ask who answers at a VISA ADDRESS and which driver fits.

    Only asks: changes no setting. ADDRESS is a VISA resource such as TCPIP0::192.0.2.22::hislip0::INSTR.
    """
    from benchrun import flow
    from benchrun.cli.documents import document_lines
    from benchrun.cli.streams import columns, say, say_json

    document = flow.identify(address, backend=backend)
    if as_json:
        say_json(document)
    else:
        say("\n".join(document_lines(document, columns())))
    return 0
