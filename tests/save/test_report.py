"""The report as a page: numbers, escaping, nothing from elsewhere, what it says of empty, stopped and failed runs."""

from __future__ import annotations

import dataclasses
import json
import math
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from hypothesis import example, given, settings
from hypothesis import strategies as st

from benchrun.archive import Event
from benchrun.bench import load_bench
from benchrun.derive.optimum_load import delivered_w, optimum_load
from benchrun.derive.results import OnePortData, Results, Table
from benchrun.drivers.registry import load_registry
from benchrun.errors import InputError
from benchrun.flow.inputs import roles
from benchrun.save.report import Subject, libraries, report_html
from benchrun.save.report.charts import embedded, explorer
from benchrun.save.report.figures import cells, duration_text, figure, fixed, heading, named
from benchrun.save.report.grids import key_figures, key_names, thinned
from benchrun.save.report.loads import source_of
from benchrun.save.report.receivers import TOGETHER, against, receiver_levels
from tests.archive.readings import META, reading
from tests.save.pages import MINUS, Page, decimals, number, same_to_the_printed_digit

BENCH = Path(__file__).parents[2] / "recipes" / "balloon-driver.bench.yaml"
MADE = "2026-12-01T22:00:00+00:00"
NASTY = "</script><script>alert(1)</script><img src=x onerror=alert(2)> & \"quoted\" 'single' ../../etc/passwd \\..\\"


def table(drives: int = 3, frequencies: int = 5, **more: Any) -> Table:
    """A hot match of made-up numbers."""
    n, chance = drives * frequencies, np.random.default_rng(drives + frequencies)
    return Table(
        "hot-match",
        {
            "drive_dbm": np.repeat(14.0 + np.arange(drives), frequencies),
            "frequency_hz": np.tile(np.linspace(2.2e9, 2.4e9, frequencies), drives),
            "output_power_dbm": chance.normal(30.0, 5.0, n),
            "gain_db": chance.normal(14.0, 1.0, n),
            "output_reflection_magnitude_ratio": chance.uniform(0.2, 0.6, n),
            "output_reflection_phase_deg": chance.uniform(-180.0, 180.0, n),
            "output_reflection_bound_ratio": chance.uniform(0.01, 0.02, n),
            "t22_magnitude_ratio": chance.uniform(0.0, 0.2, n),
            "flags": np.array([""] * n, dtype=np.str_),
            **more,
        },
    )


def subject(*, count: int = 3, results: Results | None = None, **changes: Any) -> Subject:
    """A run of `count` readings with these results."""
    readings = {"hot": [reading(index) for index in range(count)]} if count else {}
    meta = dataclasses.replace(META, state="complete", readings_planned=count, **changes.pop("meta", {}))
    return Subject(meta, readings, "d" * 64, results=results or Results(), **changes)


def page(of: Subject) -> Page:
    return Page(report_html(of, MADE))


@pytest.fixture(scope="module")
def bench():
    found, problems = load_bench(BENCH, roles(load_registry()))
    assert problems == []
    assert found is not None
    return found


# Numbers


@given(st.floats(-1e9, 1e9), st.sampled_from(["x_dbm", "x_db", "x_hz", "x_ratio", "x_deg", "x_v", "x_a", "x_degc"]))
def test_a_number_is_printed_as_it_is_to_its_last_digit(value: float, key: str) -> None:
    (text,) = cells(key, np.array([value]))
    size = 1e6 if key == "x_hz" else 1.0
    assert same_to_the_printed_digit(text, value / size)
    assert "-" not in text
    assert text.lstrip(f"+{MINUS}") == text or float(number(text)) != 0.0


def test_what_is_no_number_is_said() -> None:
    assert cells("gain_db", np.array([math.nan, math.inf, -math.inf])) == ["\N{EN DASH}", "over range", "under range"]
    assert figure("drive_dbm", 14.0) == "+14.00 dBm"
    assert named("standard", "offset-short-1") == "standard offset-short-1"
    assert named("drain.voltage_v", 28.0) == "drain voltage 28.000 V"
    assert (fixed(-0.0001, 2), fixed(-0.5, 1, signed=True)) == ("0.00", f"{MINUS}0.5")
    assert (duration_text(94.4), duration_text(12_000)) == ("1:34 min", "3:20:00 h")


def test_frequencies_have_the_decimals_that_tell_them_apart() -> None:
    assert cells("frequency_hz", np.array([2.2e9, 2.2025e9])) == ["2200.0", "2202.5"]
    assert cells("frequency_hz", np.array([2.2e9, 2.3e9])) == ["2200", "2300"]
    assert cells("frequency_hz", np.array([2.2e9, 2.2e9 + 1.0])) == ["2200.000000", "2200.000001"]


def test_every_cell_of_every_table_is_the_result_to_the_printed_digit() -> None:
    result = table()
    read = page(subject(results=Results((result,))))
    for drive in (14.0, 15.0, 16.0):
        shown, rows = read.table(f"drive {figure('drive_dbm', drive)}"), result.columns["drive_dbm"] == drive
        for key, values in result.columns.items():
            if key in ("drive_dbm", "flags"):
                continue
            above = heading(key)
            printed = shown.column(f"{above.name}, {above.unit}" if above.unit else above.name)
            size = 1e6 if key.endswith("_hz") else 1.0
            expected = values[rows].astype(float) / size
            assert len(printed) == len(expected)
            assert all(map(same_to_the_printed_digit, printed, expected)), key


@settings(max_examples=20, deadline=None)
@given(st.lists(st.floats(-60.0, 60.0) | st.just(math.nan), min_size=1, max_size=8))
def test_any_table_can_be_read_back(gains: list[float]) -> None:
    result = Table("own", {"frequency_hz": 2.2e9 + 1e6 * np.arange(len(gains)), "gain_db": np.array(gains)})
    read = page(subject(results=Results((result,))))
    assert all(map(same_to_the_printed_digit, read.table("all points").column("gain, dB"), gains))


# Names and texts that others wrote


def test_what_others_wrote_does_no_harm() -> None:
    result = table(1, 2, flags=np.array(["<b>flag</b>", ""]))
    network = OnePortData(
        "S22", NASTY, {"drive_dbm": 14.0}, np.array([2.2e9]), np.array([0j]), (f"Uncertainty: {NASTY}",)
    )
    read = page(
        subject(
            results=Results((result,), (network,), {}, (NASTY,)),
            meta={
                "title": NASTY,
                "device": {"part": NASTY, "serial": NASTY},
                "operator": NASTY,
                "recipe": NASTY,
                "files": {NASTY: NASTY},
                "identities": {NASTY: {"maker": NASTY}},
                "versions": {NASTY: NASTY},
            },
            events=[
                Event("failure", NASTY, {NASTY: NASTY, "exchanges": [{"time_ns": 5, "sent": NASTY, "received": NASTY}]})
            ],
            refusal=NASTY,
            problems=[NASTY],
        )
    )
    assert [tag for tag, _ in read.elements if tag in ("img", "iframe", "link", "object")] == []
    assert sum(tag == "script" for tag, _ in read.elements) == 3
    assert not any(name.startswith("on") for _, attributes in read.elements for name in attributes)
    assert read.text.count(NASTY) >= 14
    assert "<b>flag</b>" in read.text


def test_charts_cannot_end_their_own_element() -> None:
    result = table(1, 2)
    nasty = Table("hot-match", {NASTY: np.array([NASTY, "other"]), **result.columns})
    text = embedded({"one": explorer(nasty)})
    assert not {"<", ">", "&"} & set(text)
    assert json.loads(text)["one"]["keys"][0]["values"] == [NASTY, "other"]


def test_nothing_is_loaded_from_elsewhere_and_nothing_is_sent() -> None:
    read = page(subject(results=Results((table(),))))
    links = [value for _, attributes in read.elements for name, value in attributes.items() if name in ("href", "src")]
    assert links
    assert all(str(link).startswith("#") for link in links)
    (policy,) = [
        a["content"] for tag, a in read.elements if tag == "meta" and a.get("http-equiv") == "Content-Security-Policy"
    ]
    assert policy is not None
    assert {"default-src 'none'", "form-action 'none'", "base-uri 'none'"} <= {
        part.strip() for part in policy.split(";")
    }
    code = read.scripts["script"] + read.scripts["style"]
    assert "http" not in code
    assert "url(" not in code
    # common practice, no source: the library's own button that uploads a chart is off
    assert "showSendToCloud: false" in code


def test_the_plotting_script_unpacks_to_what_was_packed() -> None:
    from plotly.offline import get_plotlyjs

    read = page(subject(results=Results((table(),))))
    assert read.unpacked() == get_plotlyjs()
    assert "scattersmith" in read.unpacked()
    assert len(read.html.encode()) < 4_000_000


def test_every_link_has_its_section_and_every_chart_its_element() -> None:
    read = page(subject(results=Results((table(),)), count=5))
    ids = [attributes["id"] for _, attributes in read.elements if "id" in attributes]
    assert len(ids) == len(set(ids))
    assert {a["href"] for tag, a in read.elements if tag == "a"} <= {f"#{name}" for name in ids}
    drawn = set(ids) | {a["data-chart"] for _, a in read.elements if "data-chart" in a}
    assert set(read.charts) <= drawn
    named_figures = [a for tag, a in read.elements if tag == "figure"]
    assert named_figures
    assert all(a.get("aria-label") and a.get("role") == "img" for a in named_figures)


# What became of the run


def test_an_empty_run_says_so_and_shows_its_log() -> None:
    events = [
        Event("failure", "pump did not answer", {"error": "NoAnswerError"}),
        Event("safe-state", "all off: confirmed"),
    ]
    read = page(subject(count=0, events=events, meta={"identities": {}}))
    assert "No reading was committed" in read.text
    assert "pump did not answer" in read.text
    assert "all off: confirmed" in read.text
    assert "plotting" not in read.scripts
    assert len(read.html) < 60_000


@pytest.mark.parametrize(
    ("state", "told"),
    [
        ("stopped", "The run was stopped before its end. drain current 1.31 A above 1.20 A. 3 of 9 readings"),
        ("failed", "The run failed. drain current 1.31 A above 1.20 A. 3 of 9 readings"),
        (
            "unsafe",
            "look at the bench before you touch it. drain current 1.31 A above 1.20 A. PUMP NOT CONFIRMED. 3 of 9",
        ),
        ("running", "had not ended when this report was made"),
    ],
)
def test_how_the_run_ended_comes_first(state: str, told: str) -> None:
    events = [Event("failure", "drain current 1.31 A above 1.20 A."), Event("safe-state", "PUMP NOT CONFIRMED")]
    of = subject(events=events)
    meta = dataclasses.replace(of.meta, state=state, readings_planned=9)
    text = page(dataclasses.replace(of, meta=meta)).text
    assert told in text
    assert text.index(told) < text.index("What was measured")


def test_the_last_exchanges_of_a_failure_are_there() -> None:
    said = [{"time_ns": 1_500_000_000, "sent": "SOUR:POW?", "received": "", "error": "no answer within 2 s"}]
    read = page(
        subject(events=[Event("exchanges", "last exchanges with pump", {"instrument": "pump", "exchanges": said})])
    )
    assert read.table("Last exchanges").rows == [["1.500", "SOUR:POW?", "", "no answer within 2 s"]]


def test_simulated_is_shown_before_anything_else() -> None:
    text = page(subject()).text
    assert text.index("SIMULATED.") < text.index("What was measured")
    assert "SIMULATED" not in page(subject(meta={"origin": "real"})).text


def test_one_point_makes_a_page() -> None:
    read = page(subject(count=1, results=Results((table(1, 1),))))
    assert len(read.table("Key figures").rows) == 1
    assert next(chart["kind"] for chart in read.charts.values()) == "explorer"


def test_flags_say_why_and_where() -> None:
    words = np.array(
        ["above-linear-limit:reflected over-limit:reflected", "above-linear-limit:reflected", "odd"] + [""] * 12
    )
    rows = page(subject(results=Results((table(flags=words),)))).table("What was flagged").rows
    assert [(row[0], row[1]) for row in rows] == [
        ("above-linear-limit:reflected", "2 of 15"),
        ("odd", "1 of 15"),
        ("over-limit:reflected", "1 of 15"),
    ]
    assert rows[0][2].startswith("receiver reflected stood above the level")
    assert rows[0][3] == "drive +14.00 dBm, frequency 2200 MHz; drive +14.00 dBm, frequency 2250 MHz"
    assert "does not explain" in rows[1][2]


def test_flags_of_readings_are_told_where_nothing_was_derived() -> None:
    of = Subject(META, {"hot": [reading(0, flags=("reference-unlocked:pump",)), reading(1)]}, "")
    (row,) = page(of).table("What was flagged").rows
    assert row[:2] == ["reference-unlocked:pump", "1 of 2"]


# Levels at the receivers


def test_receiver_levels_are_those_of_the_raw_waves(bench) -> None:
    # 0 dBm is 1 mW (IEC 60027-3); waves are rms root-watt.
    def waved(index: int, dbm: float):
        data = np.full((3, 2, 1), 1e-4, dtype=np.complex128)
        data[1, 1, 0] = math.sqrt(1e-3 * 10 ** (dbm / 10)) * np.exp(0.7j)
        return reading(index, data=data)

    rows = receiver_levels({"hot": [waved(0, -20.0), waved(1, -2.5), waved(2, -9.0)]}, bench)
    (row,) = [r for r in rows if (r.wave, r.tone) == ("reflected", "pump")]
    assert (row.highest_dbm, row.lowest_dbm) == pytest.approx((-2.5, -20.0))
    assert (row.linear_dbm, row.damage_dbm, row.margin_db) == pytest.approx((-3.0, 15.0, -0.5))
    assert row.where == "drive +15.00 dBm, frequency 2202.5 MHz"
    (both,) = [r for r in rows if (r.wave, r.tone) == ("reflected", TOGETHER)]
    assert both.highest_dbm == pytest.approx(10 * math.log10(10**-0.25 + 2 * 1e-8 / 1e-3))
    read = page(Subject(META, {"hot": [waved(1, -2.5)]}, "", bench=bench))
    shown = {(r[1], r[2]): r for r in read.table("Highest and lowest level").rows}
    assert shown["reflected", "pump"][3:7] == [f"{MINUS}2.50", f"{MINUS}3.00", f"{MINUS}0.50", "+15.00"]
    assert shown["reflected", "pump"][-1] == "above linear"
    assert shown["incident", "pump"][-1] == "inside"


def test_levels_against_drive_are_the_highest_at_each() -> None:
    readings = [reading(index) for index in range(34)]
    for trace in against(readings, "drive_dbm"):
        wave, tone = (part.strip() for part in trace.name.split(","))
        assert list(trace.x) == [14.0 + n for n in range(17)]
        for n, level in enumerate(trace.level_dbm):
            own = [r.data[r.tones.index(tone), r.waves.index(wave), 0] for r in (readings[n], readings[n + 17])]
            assert level == pytest.approx(max(10 * math.log10(abs(v) ** 2 / 1e-3) for v in own))


def test_readings_without_waves_have_no_levels() -> None:
    bare = reading(
        0, tones=(), offsets_hz=(), waves=(), data=np.zeros((0, 0, 0), dtype=np.complex128), frequencies_hz=()
    )
    assert receiver_levels({"power": [bare]}, None) == []
    assert against([bare], "drive_dbm") == []
    assert "Receiver levels" not in page(Subject(META, {"power": [bare]}, "")).text


# Other loads


@given(
    st.complex_numbers(max_magnitude=10.0, min_magnitude=0.1),
    st.complex_numbers(max_magnitude=0.6),
    st.complex_numbers(max_magnitude=0.35),
    st.complex_numbers(max_magnitude=0.9),
)
@example(b=1 + 0j, s=0j, t=2.2e-309 + 0j, other=0j)
def test_the_device_behind_an_optimum_load_takes_into_any_load_what_derive_says(
    b: complex, s: complex, t: complex, other: complex
) -> None:
    one, two, three = (np.array([value]) for value in (b, s, t))
    best = optimum_load(one, two, three)
    again = source_of(two, three, best.reflection, best.power_w)
    load = np.array([other])
    np.testing.assert_allclose(delivered_w(load, again, two, three), delivered_w(load, one, two, three), rtol=1e-4)


# Huge runs


@settings(max_examples=30, deadline=None)
@given(st.integers(1, 60), st.integers(1, 60), st.integers(1, 500))
def test_thinning_keeps_few_enough_and_says_so(drives: int, frequencies: int, most: int) -> None:
    whole = table(drives, frequencies)
    kept = thinned(whole, most, "drawn")
    assert 1 <= kept.rows.size <= most
    assert (kept.note == "") == (kept.rows.size == len(whole))
    assert np.all(np.diff(kept.rows) > 0)
    if kept.note:
        assert f"Of {len(whole)} points" in kept.note


def test_thinning_keeps_the_ends_of_the_axis() -> None:
    kept = thinned(table(4, 1000), 1000, "drawn")
    frequency = table(4, 1000).columns["frequency_hz"][kept.rows]
    assert (frequency.min(), frequency.max()) == (2.2e9, 2.4e9)


def test_key_figures_are_at_the_middle_of_the_band() -> None:
    shown = key_figures(table())
    assert [row[:2] for row in shown.rows] == [(f"+{drive}.00", "2300") for drive in (14, 15, 16)]
    assert key_names(table()) == ["drive_dbm", "frequency_hz"]


def test_key_figures_of_many_conditions_are_few_and_say_so() -> None:
    shown = key_figures(table(150, 2))
    assert len(shown.rows) == 50
    assert shown.caption == "at the middle of the band, one condition in 3"


def test_a_long_line_says_what_it_leaves_out() -> None:
    readings = [reading(index, scalars={"drain.current_a": 1.0}) for index in range(8_001)]
    titles = [chart["title"] for chart in page(Subject(META, {"hot": readings}, "")).charts.values()]
    assert "drain current (one point in 3)" in titles


def test_what_is_absent_is_named_with_what_to_install(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(libraries, "find_spec", lambda name: None)
    with pytest.raises(InputError, match=r"a report needs jinja2 and plotly.*pip install 'benchrun\[report\]'"):
        report_html(subject(), MADE)


def test_decimals_of_a_cell() -> None:
    assert (decimals("2300"), decimals("+14.00")) == (0, 2)
