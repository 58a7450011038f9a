"""Arguments and options that several commands share."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from pathlib import Path
from typing import Any, TypeVar

import click

Function = TypeVar("Function", bound=Callable[..., Any])

FILE = click.Path(path_type=Path)
FOLDER = click.Path(path_type=Path)
RUN = click.Path(path_type=Path)

recipe_argument = click.argument("recipe", type=FILE)
run_argument = click.argument("run", type=RUN)
bench_option = click.option("--bench", type=FILE, help="Use this bench file in place of the recipe's.")
json_option = click.option("--json", "as_json", is_flag=True, help="Print JSON, for scripts.")


def seed_option(default: int | None, shown: str) -> Callable[[Function], Function]:
    """Return the option --seed N; `shown` is the default as its help says it."""
    return click.option(
        "--seed",
        type=click.IntRange(min=0),
        default=default,
        show_default=shown,
        metavar="N",
        help="The same seed gives the same readings.",
    )


def to_option(help_text: str) -> Callable[[Function], Function]:
    """Return the option --to FOLDER, which must be given."""
    return click.option("--to", required=True, type=FOLDER, metavar="FOLDER", help=help_text)


def _named_runs(_context: click.Context, _parameter: click.Parameter, texts: Sequence[str]) -> dict[str, Path]:
    """Turn NAME=RUN texts into a mapping."""
    runs: dict[str, Path] = {}
    for text in texts:
        name, equals, run = text.partition("=")
        if not (equals and name.strip() and run.strip()):
            raise click.BadParameter(f"'{text}' is not NAME=RUN, such as output-plane=runs/2026-12-01_bench_calibrate.")
        if name.strip() in runs:
            raise click.BadParameter(f"'{name.strip()}' is given twice; a calibration comes from one run.")
        runs[name.strip()] = Path(run.strip())
    return runs


def calibration_option(otherwise: str) -> Callable[[Function], Function]:
    """Return the option --calibration NAME=RUN; `otherwise` says what is taken where it is not given."""
    return click.option(
        "--calibration",
        "calibrations",
        multiple=True,
        metavar="NAME=RUN",
        callback=_named_runs,
        help=f"Take the calibration NAME from this run folder. May be repeated. Otherwise {otherwise}.",
    )
