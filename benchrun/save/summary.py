"""Tables as CSV: the unit at the end of every column's name, one row for each point."""

from __future__ import annotations

import csv
import io
from pathlib import Path

import numpy as np

from benchrun.derive.results import Column, Table
from benchrun.save.files import safe_name, write_whole


def csv_text(table: Table) -> str:
    """Return the table as CSV (RFC 4180): numbers to ten digits, an unknown number as an empty field."""
    buffer = io.StringIO()
    writer = csv.writer(buffer)
    writer.writerow(table.columns)
    writer.writerows(zip(*(_cells(column) for column in table.columns.values()), strict=True))
    return buffer.getvalue()


def write_summary(folder: Path, tables: tuple[Table, ...]) -> tuple[Path, ...]:
    """Write the first table to folder/summary.csv, each other one to folder/summary-{name}.csv; return the paths."""
    paths = []
    for number, table in enumerate(tables):
        path = folder / ("summary.csv" if number == 0 else f"summary-{safe_name(table.name)}.csv")
        write_whole(path, csv_text(table))
        paths.append(path)
    return tuple(paths)


def _cells(column: Column) -> list[str]:
    if column.dtype.kind != "f":
        return [str(value) for value in column]
    return ["" if np.isnan(value) else f"{value:.10g}" for value in column.astype(np.float64).tolist()]
