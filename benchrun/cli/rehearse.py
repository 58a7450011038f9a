"""benchrun rehearse: the whole way of a recipe on simulated instruments."""

from __future__ import annotations

from pathlib import Path

import click

from benchrun.cli.options import bench_option, calibration_option, recipe_argument, seed_option, to_option


@click.command()
@recipe_argument
@to_option("Make the run folder in this folder.")
@bench_option
@seed_option(None, "that of a served bench, else 1")
@click.option("--real-time", is_flag=True, help="Let bench time run at the speed of the clock on the wall.")
@calibration_option("the newest that fits is taken")
def command(
    recipe: Path, to: Path, bench: Path | None, seed: int | None, real_time: bool, calibrations: dict[str, Path]
) -> int:
    """Rehearse a recipe on simulated instruments.

    The same code path as on the bench, in virtual time. Calibrations that the recipe names and that are absent are
    rehearsed first. The last line of standard output is the run folder.
    """
    from benchrun import flow
    from benchrun.cli.progress import TerminalProgress
    from benchrun.cli.result import show_result

    with TerminalProgress() as listener:
        result = flow.rehearse(
            recipe, to, bench=bench, seed=seed, real_time=real_time, calibrations=calibrations, listener=listener
        )
    return show_result(result)
