"""Result tables as cells, one part for each swept condition, and what is left out of them in huge runs."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from benchrun.derive.results import Table
from benchrun.save.report.figures import Heading, cells, heading, named

FREQUENCY = "frequency_hz"
#: More rows than this are not printed: a page must open, and summary.csv has them all.
MOST_ROWS = 4_000
#: More points than this are not drawn.
MOST_POINTS = 12_000
#: What key figures do without, by the end of the column's name: it stands in the table of all points.
NO_KEY_FIGURE = (
    "pump_frequency_hz",
    "delivered_power_dbm",
    "t22_phase_from_twice_b2_pump_deg",
    "optimum_load_extrapolated_power_dbm",
    "_degc",
    ".voltage_v",
)
#: More rows than this are not printed as key figures.
MOST_KEY_ROWS = 60

Rows = npt.NDArray[np.int64]


@dataclass(frozen=True, slots=True)
class Grid:
    """A table as it is printed."""

    caption: str
    headings: tuple[Heading, ...]
    rows: tuple[tuple[str, ...], ...]


@dataclass(frozen=True, slots=True)
class Thinned:
    """Rows (K,) of a table that are kept, and a sentence on what is not; "" where all are."""

    rows: Rows
    note: str


def key_names(table: Table) -> list[str]:
    """Return the columns that say where a row was taken: all up to the frequency, or the first one."""
    names = list(table.columns)
    return names[: names.index(FREQUENCY) + 1] if FREQUENCY in names else names[:1]


def parts(table: Table, rows: Rows) -> Iterator[Grid]:
    """Yield the `rows` of a table, a part for each combination of its keys but the frequency."""
    keys = [key for key in key_names(table) if key != FREQUENCY]
    shown = [key for key in table.columns if key not in keys]
    for chosen, caption in _groups(table, keys, rows):
        yield _grid(table, shown, chosen, caption)


def key_figures(table: Table) -> Grid:
    """Return one row for each combination of the keys, at the frequency nearest to the middle of the band."""
    keys = [key for key in key_names(table) if key != FREQUENCY]
    everything = np.arange(len(table))
    if not keys:
        chosen = np.unique(np.linspace(0, len(table) - 1, min(len(table), 9)).astype(np.int64))
        return _grid(table, _short(table), chosen, "at a few frequencies of the band")
    middle = [_middle(table, rows) for rows, _ in _groups(table, keys, everything)]
    step = -(-len(middle) // MOST_KEY_ROWS)
    caption = "at the middle of the band" + (f", one condition in {step}" if step > 1 else "")
    return _grid(table, _short(table), np.array(middle[::step], dtype=np.int64), caption)


def _short(table: Table) -> list[str]:
    """Return the columns of the key figures: flags only where there is one."""
    bare = "flags" in table.columns and not np.any(table.columns["flags"] != "")
    return [key for key in table.columns if not key.endswith(NO_KEY_FIGURE) and not (key == "flags" and bare)]


def thinned(table: Table, most: int, verb: str) -> Thinned:
    """Return which rows are kept so that there are at most `most`: every n-th value of the longest axis, its ends too.

    `verb` says what is done with them: "drawn", "printed".
    """
    rows, axes = np.arange(len(table)), {key: np.unique(table.columns[key]) for key in key_names(table)}
    steps = dict.fromkeys(axes, 1)
    while rows.size > most and (longest := max(axes, key=lambda key: len(axes[key]) / steps[key])):
        steps[longest] *= 2
        kept = axes[longest][_every(len(axes[longest]), steps[longest])]
        rows = rows[np.isin(table.columns[longest][rows], kept)]
        if steps[longest] > len(axes[longest]):
            break
    told = [f"one value in {step} of {heading(key).name}" for key, step in steps.items() if step > 1]
    note = f"Of {len(table)} points, {rows.size} are {verb}: {' and '.join(told)}. The archive has all." if told else ""
    return Thinned(rows[:most], note)


def _every(count: int, step: int) -> list[int]:
    return sorted({*range(0, count, step), count - 1})


def _groups(table: Table, keys: Sequence[str], rows: Rows) -> Iterator[tuple[Rows, str]]:
    """Yield the rows of each combination of the keys, in the table's order, with the combination in words."""
    if not keys:
        yield rows, "all points"
        return
    codes = np.zeros(rows.size, dtype=np.int64)
    for key in keys:
        values, code = np.unique(table.columns[key][rows], return_inverse=True)
        codes = codes * len(values) + code
    _, first = np.unique(codes, return_index=True)
    for start in np.sort(first):
        chosen = rows[codes == codes[start]]
        yield chosen, ", ".join(named(key, table.columns[key][chosen[0]].item()) for key in keys)


def _middle(table: Table, rows: Rows) -> int:
    if FREQUENCY not in table.columns:
        return int(rows[0])
    frequency_hz = table.columns[FREQUENCY].astype(np.float64)
    target = 0.5 * (frequency_hz.min() + frequency_hz.max())
    return int(rows[np.argmin(np.abs(frequency_hz[rows] - target))])


def _grid(table: Table, shown: Sequence[str], rows: Rows, caption: str) -> Grid:
    columns = [cells(key, table.columns[key][rows]) for key in shown]
    headings = tuple(heading(key, number=table.columns[key].dtype.kind == "f") for key in shown)
    return Grid(caption, headings, tuple(zip(*columns, strict=True)))
