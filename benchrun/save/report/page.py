"""Everything put into one page: sections filled in, styles and scripts inside, every text escaped by the template."""

from __future__ import annotations

from collections.abc import Mapping
from functools import cache
from importlib.resources import files
from typing import TYPE_CHECKING, Any

from benchrun.derive.results import Table
from benchrun.save.report import charts, findings, overview, planes
from benchrun.save.report.figures import fixed, time_text
from benchrun.save.report.grids import MOST_ROWS, key_figures, parts, thinned
from benchrun.save.report.libraries import plotting_script, require_libraries
from benchrun.save.report.receivers import against, receiver_levels
from benchrun.save.report.subject import Subject

if TYPE_CHECKING:
    import jinja2

FILE_NAME = "report.html"
AMBIENT = "ambient.temperature_degc"
#: Names of result tables for people.
TITLES = {
    "hot-match": "Hot output match",
    "one-port": "Reflection, as one port",
    "calibration": "Calibration",
    "levelling": "Levelling",
}


def report_html(subject: Subject, made_utc: str) -> str:
    """Return the page of a run, made at `made_utc` (ISO 8601). Raises InputError where a library is absent."""
    require_libraries()
    drawn = _Drawn()
    filled = {
        "s": subject,
        "made": time_text(made_utc),
        "state": overview.state(subject),
        "facts": overview.facts(subject),
        "sources": overview.sources(subject),
        "instruments": overview.instruments(subject),
        "parts": overview.parts(subject),
        "log": overview.log_lines(subject),
        "readings": findings.readings(subject),
        "results": [_result(table, drawn) for table in subject.results.tables if len(table)],
        "levels": _levels(subject, drawn),
        "planes": _planes(subject, drawn),
        "scalars": _scalars(subject, drawn),
        "trust": findings.trust(subject),
        "flags": findings.flags(subject),
        "optimum": any("optimum_load_extrapolated_power_dbm" in t.columns for t in subject.results.tables),
        "hot": any(table.name == "hot-match" for table in subject.results.tables),
    }
    script = {"data": charts.embedded(drawn.charts), "plotting": plotting_script() if drawn.charts else ""}
    return _template().render(**filled, script=script, style=_text("report.css"), code=_text("report.js"))


class _Drawn:
    """The charts of a page, each under the name of the element that it is drawn into."""

    def __init__(self) -> None:
        self.charts: dict[str, Any] = {}

    def add(self, kind: str, chart: Mapping[str, Any] | None) -> str:
        """Take a chart and return its name, "" where there is nothing to draw."""
        if chart is None:
            return ""
        name = f"chart-{len(self.charts) + 1}"
        self.charts[name] = {"kind": kind, **chart}
        return name


def _result(table: Table, drawn: _Drawn) -> dict[str, Any]:
    explored = None if table.name == "calibration" else charts.explorer(table)
    printed = thinned(table, MOST_ROWS, "printed")
    return {
        "title": TITLES.get(table.name, table.name.replace("-", " ")),
        "chart": drawn.add("explorer", explored),
        "keys": [] if explored is None else explored["keys"],
        "polar": bool(explored and explored["polar"]),
        "smith": bool(explored and explored["smith"]),
        "loads": bool(explored and explored["source"]),
        "panels": [] if explored is None else explored["panels"],
        "drawn_note": "" if explored is None else explored["note"],
        "figures": key_figures(table),
        "parts": list(parts(table, printed.rows)),
        "printed_note": printed.note,
    }


def _levels(subject: Subject, drawn: _Drawn) -> dict[str, Any]:
    rows = receiver_levels(subject.readings, subject.bench)
    linear = [row.linear_dbm for row in rows if row.linear_dbm is not None]
    named = []
    for name, own in subject.readings.items():
        key = "drive_dbm" if "drive_dbm" in own[0].conditions else "frequency_hz"
        named.append(drawn.add("lines", charts.level_chart(name, against(own, key), key, linear)))
    return {"rows": rows, "charts": [name for name in named if name]}


def _planes(subject: Subject, drawn: _Drawn) -> list[dict[str, Any]]:
    return [
        {
            "plane": plane,
            "charts": [
                name
                for chart in (charts.residual_chart(plane), charts.term_chart(plane) if _untold(plane) else None)
                if (name := drawn.add("lines", chart))
            ],
        }
        for plane in planes.planes(subject)
    ]


def _untold(plane: planes.Plane) -> bool:
    """Whether the results do not show a plane's curves already: those of a levelling that this run made are there."""
    return plane.used or plane.kind != "levelling"


def _scalars(subject: Subject, drawn: _Drawn) -> dict[str, Any]:
    then = [one.circumstances.temperature_degc for one in subject.known.values()]
    at_calibration = next((value for value in then if value is not None), None)
    rows = findings.scalars(subject)
    named = [
        drawn.add("lines", charts.scalar_chart(row, at_calibration if row.key == AMBIENT else None))
        for row in rows
        if row.values.size > 1
    ]
    known = [(name, one.circumstances.temperature_degc) for name, one in subject.known.items()]
    return {"rows": rows, "charts": named, "then": [(name, fixed(t, 2)) for name, t in known if t is not None]}


@cache
def _template() -> jinja2.Template:
    import jinja2

    environment = jinja2.Environment(
        loader=jinja2.PackageLoader("benchrun.save.report", "."),
        autoescape=True,
        trim_blocks=True,
        lstrip_blocks=True,
        undefined=jinja2.StrictUndefined,
    )
    environment.filters["fixed"] = lambda value, decimals, signed=False: fixed(value, decimals, signed)
    return environment.get_template("page.html")


@cache
def _text(name: str) -> str:
    return (files("benchrun.save.report") / name).read_text("utf-8")
