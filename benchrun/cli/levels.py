"""benchrun levels: what will happen at every plane, before anything is switched on."""

from __future__ import annotations

from pathlib import Path
from typing import TYPE_CHECKING

import click

from benchrun.cli.options import bench_option, json_option, recipe_argument

if TYPE_CHECKING:
    from benchrun.flow import LevelReport


@click.command()
@recipe_argument
@bench_option
@json_option
def command(recipe: Path, bench: Path | None, as_json: bool) -> int:
    """Show the worst-case level at every plane against its limit.

    Goes through every condition of the schedule. Touches no instrument. Exit code 3 where a level is over its limit.
    """
    from benchrun import flow
    from benchrun.cli.streams import say, say_json

    report = flow.plan_levels(recipe, bench=bench)
    if as_json:
        say_json(report.to_dict())
    else:
        _show(report)
    report.table.require()
    if not as_json:
        say("Every level is inside its limit.")
    return 0


def _show(report: LevelReport) -> None:
    from benchrun.cli.figures import count_text, duration_text, level_text, ratio_text
    from benchrun.cli.streams import columns, say
    from benchrun.cli.tables import table

    axes = f" ({report.axes})" if report.axes else ""
    say(f"Worst case over {count_text(report.readings, 'condition')}{axes}, all reflection phases.")
    say()
    rows = [
        (
            row.plane,
            row.tone,
            level_text(row.level_dbm),
            level_text(row.limit_dbm),
            row.limit_kind or "",
            ratio_text(row.margin_db),
            row.note or "",
        )
        for row in report.table.rows
    ]
    headings = ("plane", "tone", "level", "limit", "", "margin", "")
    for line in table(headings, rows, right=(2, 3, 5), width=columns()):
        say(line)
    say()
    say(f"Time: {duration_text(report.duration_s)}, {count_text(report.operator_actions, 'operator action')}.")
    for note in report.notes:
        say(note)
