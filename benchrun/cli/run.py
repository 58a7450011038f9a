"""benchrun run: a recipe on the real bench."""

from __future__ import annotations

from pathlib import Path

import click

from benchrun.cli.options import bench_option, calibration_option, recipe_argument, to_option

CAUTION = """CAUTION: this switches RF and drain on. Connect every load first, keep your hands off open connectors,
have a hardware interlock (software is none), and follow your local rules for RF exposure and high voltage. Ctrl-C stops
at a safe point: sources off, then the drain, and the gate last."""


@click.command(epilog=CAUTION)
@recipe_argument
@to_option("Make the run folder in this folder.")
@bench_option
@calibration_option("the newest that fits is taken")
def command(recipe: Path, to: Path, bench: Path | None, calibrations: dict[str, Path]) -> int:
    """Run a recipe on the real bench.

    Nothing is switched on before every level has passed its check. A recipe that asks the operator for something needs
    a terminal. The last line of standard output is the run folder.
    """
    from benchrun import flow
    from benchrun.acquire.prompts import TerminalPrompter
    from benchrun.cli.progress import TerminalProgress
    from benchrun.cli.result import show_result

    with TerminalProgress() as listener:
        result = flow.run(
            recipe, to, bench=bench, calibrations=calibrations, listener=listener, prompter=TerminalPrompter()
        )
    return show_result(result)
