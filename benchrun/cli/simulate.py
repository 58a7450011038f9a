"""benchrun simulate: a simulated bench on this machine's network, for other programs to talk to."""

from __future__ import annotations

from contextlib import closing, suppress
from pathlib import Path
from typing import TYPE_CHECKING

import click

from benchrun.cli.options import FILE, seed_option

if TYPE_CHECKING:
    from benchrun.flow import ServedBench


@click.command()
@click.argument("bench", type=FILE)
@seed_option(1, "1")
@click.option("--write-bench", type=FILE, help="Write a bench file that points at the simulated instruments.")
def command(bench: Path, seed: int, write_bench: Path | None) -> int:
    """Serve simulated instruments for BENCH until stopped.

    Prints the HiSLIP and the raw-socket address of each instrument, all on 127.0.0.1. Ctrl-C or SIGTERM stops it.
    """
    from benchrun import flow

    with suppress(KeyboardInterrupt), closing(flow.simulate(bench, seed, write_bench)) as served:
        _show(served, bench, write_bench)
        served.wait()
    return 0


def _show(served: ServedBench, bench: Path, write_bench: Path | None) -> None:
    from benchrun.cli.streams import columns, say, talk
    from benchrun.cli.tables import table

    rows = [(name, address, served.sockets[name]) for name, address in served.hislip.items()]
    for line in table(("instrument", "HiSLIP", "raw socket"), rows, width=columns()):
        say(line)
    say(f"rehearsal channel  {served.channel}")
    if write_bench is not None:
        say(f"bench file         {write_bench}")
    talk(f"Simulated instruments for {bench}. Nothing real is touched. Ctrl-C stops them.")
