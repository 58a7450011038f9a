"""The few rows of a result that a terminal shows: one for each swept condition, at the middle of the band."""

from __future__ import annotations

import math
from collections.abc import Iterator, Mapping, Sequence
from typing import Any

import numpy as np

from benchrun.derive.results import Results, Table
from benchrun.quantities import show

MOST_ROWS = 40


def rows_of(results: Results) -> list[dict[str, str]]:
    """Return readable rows of the first table; [] where there is none."""
    if not results.tables:
        return []
    table = results.tables[0]
    rows = {"hot-match": _hot, "one-port": _reflection}.get(table.name)
    return list(rows(table))[:MOST_ROWS] if rows else []


def _hot(table: Table) -> Iterator[dict[str, str]]:
    columns = table.columns
    for index in _middle(table):
        row = {}
        if "drive_dbm" in columns:
            row["drive"] = f"{columns['drive_dbm'][index]:+.1f} dBm"
        row["P out"] = f"{columns['output_power_dbm'][index]:.2f} dBm"
        for name, title in (("gain_db", "gain"), ("compression_db", "compr.")):
            if name in columns:
                row[title] = f"{columns[name][index]:.2f} dB"
        row[f"output reflection, {show(float(columns['frequency_hz'][index]), 'frequency', 4)}"] = _polar(
            columns, "output_reflection", index
        )
        if "t22_magnitude_ratio" in columns:
            row["|T22|"] = f"{columns['t22_magnitude_ratio'][index]:.3f}"
        if "optimum_load_extrapolated_magnitude_ratio" in columns:
            row["optimum load (extrapolated)"] = _polar(columns, "optimum_load_extrapolated", index)
        yield row


def _reflection(table: Table) -> Iterator[dict[str, str]]:
    columns = table.columns
    for index in np.linspace(0, len(table) - 1, min(len(table), 5)).astype(int):
        yield {
            "frequency": show(float(columns["frequency_hz"][index]), "frequency", 6),
            "output reflection": _polar(columns, "output_reflection", index),
        }


def _polar(columns: Mapping[str, Any], name: str, index: int) -> str:
    magnitude, degrees = float(columns[f"{name}_magnitude_ratio"][index]), float(columns[f"{name}_phase_deg"][index])
    return f"{magnitude:.3f} at {degrees:4.0f} deg" if math.isfinite(magnitude) else "none"


def _middle(table: Table) -> Sequence[int]:
    """Return, for each swept condition, the row nearest to the middle frequency."""
    frequency_hz = np.asarray(table.columns["frequency_hz"], dtype=np.float64)
    target = 0.5 * (frequency_hz.min() + frequency_hz.max())
    drive = np.asarray(table.columns.get("drive_dbm", np.zeros(len(table))), dtype=np.float64)
    chosen = []
    for value in np.unique(drive):
        rows = np.flatnonzero(drive == value)
        chosen.append(int(rows[np.argmin(np.abs(frequency_hz[rows] - target))]))
    return chosen
