"""What the page's script draws, as plain data: results to explore, and lines that stand as they are."""

from __future__ import annotations

import json
from collections.abc import Sequence
from typing import Any

import numpy as np

from benchrun.contract.capture import ComplexArray, FloatArray
from benchrun.derive.results import Column, Table
from benchrun.save.report.figures import figure, heading, unit_of
from benchrun.save.report.findings import Scalar
from benchrun.save.report.grids import MOST_POINTS, Rows, key_names, thinned
from benchrun.save.report.loads import OPTIMUM, REFLECTION, T22_PHASE, has_loads, polar, source_wave
from benchrun.save.report.planes import Curve, Plane
from benchrun.save.report.receivers import TOGETHER, Trace

#: Digits that a chart needs.
DIGITS = 7
#: More points than this in one line are thinned out.
MOST_IN_LINE = 4_000
#: Panels of a result: title, axis, and the columns in it (column, name, column of its bound or "").
PANELS: Sequence[tuple[str, str, tuple[tuple[str, str, str], ...]]] = (
    (
        "Output power",
        "dBm",
        (
            ("output_power_dbm", "out of the device", ""),
            ("delivered_power_dbm", "delivered to this bench", ""),
            ("optimum_load_extrapolated_power_dbm", "into the optimum load (extrapolated)", ""),
        ),
    ),
    ("Gain", "dB", (("gain_db", "gain", ""),)),
    ("Compression", "dB", (("compression_db", "compression", ""),)),
    (
        "|Output reflection|",
        "",
        (("output_reflection_magnitude_ratio", "output reflection", "output_reflection_bound_ratio"),),
    ),
    ("|T22|", "", (("t22_magnitude_ratio", "|T22|", "t22_bound_ratio"),)),
    ("Power at the plane", "dBm", (("power_dbm", "power", ""),)),
    ("Gain of the chain", "dB", (("chain_gain_db", "gain of the chain", ""),)),
)
SMITH = (REFLECTION, OPTIMUM)
_KNOWN = {key for _, _, lines in PANELS for key, _, _ in lines} | {f"{name}_magnitude_ratio" for name in SMITH}


def explorer(table: Table) -> dict[str, Any] | None:
    """Return a result to explore: keys with their values, columns of points; None where nothing can be drawn."""
    shown = thinned(table, MOST_POINTS, "drawn")
    panels = _panels(table)
    smith = {name: _polar(table, name, shown.rows) for name in SMITH if f"{name}_phase_deg" in table.columns}
    if not (panels or smith) or not len(table):
        return None
    return {
        "name": table.name,
        "note": shown.note,
        "keys": [_key(key, table.columns[key][shown.rows]) for key in key_names(table)],
        "smith": smith,
        "polar": _t22(table, shown.rows),
        "source": _parts(source_wave(table)[shown.rows]) if has_loads(table) else None,
        "panels": panels,
        "columns": {
            key: _numbers(table.columns[key][shown.rows].astype(np.float64))
            for key in dict.fromkeys(key for panel in panels for one in panel["lines"] for key in one[:3:2] if key)
        },
    }


def residual_chart(plane: Plane) -> dict[str, Any] | None:
    """Return the residuals of the standards over frequency."""
    title = "Corrected less defined reflection of each standard"
    return _over_frequency(title, "magnitude", plane.residual_curves)


def term_chart(plane: Plane) -> dict[str, Any] | None:
    """Return what a calibration or levelling found, over frequency."""
    title = "Error terms of the plane" if plane.kind == "calibration" else "Gain of the chain, as levelled"
    return _over_frequency(title, "dB", plane.terms)


def level_chart(reading: str, traces: Sequence[Trace], key: str, linear_dbm: Sequence[float]) -> dict[str, Any] | None:
    """Return the highest level at each receiver against a condition, with the linear limits as lines across."""
    unit = unit_of(key)
    size = unit.size if unit else 1.0
    lines = [_line(t.name, t.x / size, t.level_dbm) for t in traces if not t.name.endswith(TOGETHER)]
    marks = [{"name": "linear limit", "y": limit} for limit in sorted(set(linear_dbm))]
    title = f"Highest level at the receivers, {reading}{_left_out(max((t.x.size for t in traces), default=0))}"
    return _lines(title, _axis(heading(key).name, unit.name if unit else ""), "dBm", lines, marks)


def scalar_chart(scalar: Scalar, then: float | None) -> dict[str, Any] | None:
    """Return what was read beside the waves over the run, with what it was at the calibration where that is known."""
    unit = unit_of(scalar.key)
    size = unit.size if unit else 1.0
    marks = [] if then is None else [{"name": "at the calibration", "y": then / size}]
    line = _line(scalar.heading.name, scalar.time_s / 60.0, scalar.values / size)
    title = scalar.heading.name + _left_out(scalar.values.size)
    return _lines(title, "time on the bench, min", scalar.heading.unit, [line], marks)


def embedded(charts: dict[str, Any]) -> str:
    """Return charts as JSON that can stand inside a script element: no text in it can end that element."""
    text = json.dumps(charts, separators=(",", ":"), allow_nan=False)
    return text.replace("&", "\\u0026").replace("<", "\\u003c").replace(">", "\\u003e")


def _panels(table: Table) -> list[dict[str, Any]]:
    panels = []
    for title, unit, wanted in PANELS:
        there = [line for line in wanted if line[0] in table.columns]
        if there:
            lines = [[key, name, bound if bound in table.columns else ""] for key, name, bound in there]
            panels.append({"title": title, "unit": unit, "lines": lines})
    return panels + [_panel(key) for key in table.columns if key not in _KNOWN and _drawn(key, table)]


def _panel(key: str) -> dict[str, Any]:
    """Return a panel of its own for a column that PANELS does not name."""
    named = heading(key)
    return {"title": named.name, "unit": named.unit, "lines": [[key, named.name, ""]]}


def _drawn(key: str, table: Table) -> bool:
    """Whether a column that PANELS does not name is worth a panel: a current, or a result by its unit."""
    if table.columns[key].dtype.kind != "f" or key in key_names(table):
        return False
    return key.endswith((".current_a", "_magnitude_ratio", "_magnitude_db", "_gain_db"))


def _key(key: str, column: Column) -> dict[str, Any]:
    """Return an axis: its name, unit, the values it takes with their texts, and which of them each point has."""
    values, code = np.unique(column, return_inverse=True)
    unit, number = unit_of(key), column.dtype.kind == "f"
    size = unit.size if unit and number else 1.0
    return {
        "name": heading(key).name,
        "unit": unit.name if unit and number else "",
        "values": _numbers(values.astype(np.float64) / size) if number else [str(value) for value in values],
        "texts": [figure(key, value.item()) for value in values],
        "of": code.tolist(),
    }


def _polar(table: Table, name: str, rows: Rows) -> dict[str, Any]:
    bound = table.columns.get(f"{name}_bound_ratio")
    return {
        **_parts(polar(table, name)[rows]),
        "bound": None if bound is None else _numbers(bound[rows].astype(np.float64)),
    }


def _t22(table: Table, rows: Rows) -> dict[str, Any] | None:
    if T22_PHASE not in table.columns:
        return None
    return {
        "r": _numbers(table.columns["t22_magnitude_ratio"][rows].astype(np.float64)),
        "deg": _numbers(table.columns[T22_PHASE][rows].astype(np.float64)),
    }


def _parts(values: ComplexArray) -> dict[str, Any]:
    return {"re": _numbers(values.real), "im": _numbers(values.imag)}


def _over_frequency(title: str, unit: str, curves: Sequence[Curve]) -> dict[str, Any] | None:
    lines = [_line(curve.name, curve.frequency_hz / 1e6, curve.values) for curve in curves]
    return _lines(title, "frequency, MHz", unit, lines)


def _lines(
    title: str, x: str, y: str, lines: list[dict[str, Any]], marks: Sequence[dict[str, Any]] = ()
) -> dict[str, Any] | None:
    return {"title": title, "x": x, "y": y, "lines": lines, "marks": list(marks)} if lines else None


def _line(name: str, x: FloatArray, y: FloatArray) -> dict[str, Any]:
    step = _step(x.size)
    return {"name": name, "x": _numbers(x[::step]), "y": _numbers(y[::step])}


def _step(size: int) -> int:
    return -(-size // MOST_IN_LINE) or 1


def _left_out(size: int) -> str:
    """Return what a line of so many points leaves out, "" where it shows them all."""
    return f" (one point in {step})" if (step := _step(size)) > 1 else ""


def _axis(name: str, unit: str) -> str:
    return f"{name}, {unit}" if unit else name


def _numbers(values: FloatArray) -> list[float | None]:
    """Return numbers to the digits that a chart needs; None for what is no number."""
    return [float(f"{value:.{DIGITS}g}") if np.isfinite(value) else None for value in values.tolist()]
