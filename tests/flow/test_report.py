"""The report of a run: from its archive alone, its numbers the archive's, of every kind of run and however it ended."""

from __future__ import annotations

import csv
import math
import shutil
import subprocess
from collections.abc import Callable
from dataclasses import replace
from importlib import import_module
from pathlib import Path

import numpy as np
import pytest

from benchrun.archive import ArchiveWriter, Event, open_archive
from benchrun.cli.ending import run_to_end
from benchrun.errors import FileProblemsError, FolderError, InputError, StoppedError
from benchrun.flow import RunResult, check_files, derive_again, report
from benchrun.save.report.figures import figure, heading, unit_of
from tests.faults.flow.worlds import Worlds
from tests.flow.conftest import Way
from tests.flow.stage import CALIBRATE, COLD, HOT, Silence, change
from tests.flow.test_derive_again import Stopping
from tests.save.pages import Page, number, same_to_the_printed_digit

CHROMIUM = shutil.which("chromium") or shutil.which("chromium-browser") or shutil.which("google-chrome")


def read(path: Path) -> Page:
    return Page(path.read_text("utf-8"))


def rows_of(folder: Path) -> list[dict[str, str]]:
    with (folder / "summary.csv").open(encoding="utf-8", newline="") as file:
        return list(csv.DictReader(file))


def column_name(key: str) -> str:
    above = heading(key)
    return f"{above.name}, {above.unit}" if above.unit else above.name


def assert_same(page: Page, caption: str, rows: list[dict[str, str]]) -> None:
    """Every number of summary.csv stands in the table, to the printed digit."""
    table = page.table(caption)
    assert len(table.rows) == len(rows)
    assert len(set(table.headings)) == len(table.headings)
    for key in rows[0]:
        if key in ("drive_dbm", "pump_level_dbm"):
            continue
        if key == "flags":
            assert table.column("flags") == [row["flags"] for row in rows]
            continue
        size = unit_of(key).size if unit_of(key) else 1.0
        values = [float(row[key]) / size if row[key] else math.nan for row in rows]
        cells = table.column(column_name(key))
        assert all(map(same_to_the_printed_digit, cells, values)), key


# Numbers


def test_the_numbers_are_the_archives_to_the_printed_digit(shared: Way, tmp_path: Path) -> None:
    page, rows = read(report(shared.hot, tmp_path / "r.html")), rows_of(shared.hot)
    for drive in sorted({row["drive_dbm"] for row in rows}, key=float):
        own = [row for row in rows if row["drive_dbm"] == drive]
        assert_same(page, f"drive {figure('drive_dbm', float(drive))}", own)


def test_receiver_levels_are_the_raw_waves_in_the_archive(shared: Way, tmp_path: Path) -> None:
    page = read(report(shared.hot, tmp_path / "r.html"))
    with open_archive(shared.hot) as archive:
        waves = archive.stack("hot")
    for row in page.table("Highest and lowest level").rows:
        _, wave, tone, highest, limit, margin, damage, lowest, _, verdict = row
        tones = range(3) if tone == "all together" else [waves.tones.index(tone)]
        power = sum(np.abs(waves.data[:, t, waves.waves.index(wave), :]) ** 2 for t in tones)
        assert same_to_the_printed_digit(highest, 10 * math.log10(power.max() / 1e-3))
        assert same_to_the_printed_digit(lowest, 10 * math.log10(power.min() / 1e-3))
        assert (number(limit), number(damage), verdict) == (-3.0, 15.0, "inside")
        assert number(margin) == pytest.approx(-3.0 - number(highest), abs=0.011)


def test_what_was_read_beside_the_waves_is_the_archives(shared: Way, tmp_path: Path) -> None:
    table = read(report(shared.hot, tmp_path / "r.html")).table("What was read beside the waves")
    with open_archive(shared.hot) as archive:
        scalars = archive.stack("hot").scalars
    for name, _unit, *cells in table.rows:
        values = scalars[
            f"{name.replace(' ', '.')}_{'a' if 'current' in name else 'v' if 'voltage' in name else 'degc'}"
        ]
        expected = values[0], values[-1], values.min(), values.mean(), values.max()
        assert all(map(same_to_the_printed_digit, cells, map(float, expected)))


def test_it_says_what_was_measured_and_with_what(shared: Way, tmp_path: Path) -> None:
    page = read(report(shared.hot, tmp_path / "r.html"))
    facts = page.table("The run").pairs()
    with open_archive(shared.hot) as archive:
        meta, digest = archive.meta, archive.digest()
    assert facts["Device"] == "HD-31, serial 0042"
    assert facts["Origin"].startswith("simulated, seed 1")
    assert facts["Readings"] == "27 of 27 planned"
    assert {row[0] for row in page.table("Who answered").rows} == set(meta.identities)
    assert page.table("Which data").pairs()["Readings, SHA-256"] == digest
    for text in (*meta.files.values(), *shared.result.notes):
        assert " ".join(text.split()) in page.text
    for word in ("SIMULATED.", "extrapolated", "AM-PM is not shown", "Uncertainty:", "first-order bound", "RF burns"):
        assert word in page.text


def test_the_lines_of_trust_are_those_of_the_touchstone_files(shared: Way, tmp_path: Path) -> None:
    text = read(report(shared.hot, tmp_path / "r.html")).text
    heads = [
        line.removeprefix("!").strip()
        for path in shared.hot.glob("touchstone/*.s1p")
        for line in path.read_text("iso-8859-1").splitlines()
        if line.startswith("!")
    ]
    for start in ("Calibration:", "Calibration residuals", "Uncertainty:", "Frequency:"):
        (line,) = {line for line in heads if line.startswith(start)}
        assert " ".join(line.split()) in text
    bounds = {line for line in heads if line.startswith("S11 column: output reflection")}
    assert max(bounds, key=lambda line: float(line.split("within ")[1].split()[0])) in text


# From the archive alone, of every kind of run


def test_the_archive_alone_is_enough(shared: Way, tmp_path: Path) -> None:
    alone = tmp_path / "alone"
    alone.mkdir()
    shutil.copy(shared.hot / "archive.sqlite", alone)
    whole = read(report(shared.hot, tmp_path / "whole.html"))
    again = read(report(alone, tmp_path / "alone.html"))
    assert [(t.caption, t.rows) for t in again.tables] == [(t.caption, t.rows) for t in whole.tables]
    assert again.charts == whole.charts


def test_a_calibration_shows_its_residuals_over_frequency(shared: Way, tmp_path: Path) -> None:
    page = read(report(shared.calibration, tmp_path / "r.html"))
    assert_same(page, "all points", rows_of(shared.calibration))
    residuals = page.table("Residuals").pairs()
    assert list(residuals) == ["open", "short", "match", "offset-short-1", "offset-short-2"]
    chart = next(chart for chart in page.charts.values() if chart["title"].startswith("Corrected less defined"))
    for line in chart["lines"]:
        rms = math.sqrt(np.mean(np.square(line["y"])))
        assert same_to_the_printed_digit(residuals[line["name"]], rms)
    assert "valid until" in page.text


def test_a_levelling_and_a_cold_reflection_have_their_own(
    small: Way, tmp_path: Path, rehearse: Callable[..., RunResult]
) -> None:
    page = read(report(small.levelling, tmp_path / "levelling.html"))
    assert_same(page, "pump level \N{MINUS SIGN}18.00 dBm", rows_of(small.levelling)[:8])
    cold = rehearse(COLD, seed=1).folder
    page = read(report(cold, tmp_path / "cold.html"))
    assert_same(page, "all points", rows_of(cold))
    assert page.table("Readings").rows[0][:2] == ["cold", "1"]


def test_it_shows_the_newest_result(small: Way, tmp_path: Path, rehearse: Callable[..., RunResult]) -> None:
    change(small.recipes, "if-bandwidth: 100 Hz", "if-bandwidth: 10 kHz")
    again = derive_again(small.hot, {"output-plane": rehearse(CALIBRATE, seed=1).folder})
    page = read(report(small.hot, tmp_path / "r.html"))
    assert_same(page, "drive +14.00 dBm", rows_of(again.folder)[:9])


def test_a_stopped_run_shows_what_it_has(small: Way, rehearse: Callable[..., RunResult]) -> None:
    with pytest.raises(StoppedError) as stopped:
        rehearse(HOT, listener=Stopping(12))
    page = read(report(stopped.value.folder))
    assert "STOPPED." in page.text
    assert "13 of 27 readings are in the archive" in page.text
    assert len(page.table("drive +22.00 dBm").rows) == 4
    assert any("confirmed" in row[3] for row in page.table("What happened").rows)


def test_a_run_without_readings_has_a_page(small: Way, rehearse: Callable[..., RunResult]) -> None:
    class AtOnce(Silence):
        def phase(self, *told: object) -> None:
            raise KeyboardInterrupt

    with pytest.raises(StoppedError) as stopped:
        rehearse(HOT, listener=AtOnce())
    page = read(report(stopped.value.folder))
    assert "No reading was committed" in page.text
    assert page.charts.keys() == {chart for chart in page.charts if page.charts[chart]["kind"] == "lines"}


def test_a_calibration_that_broke_off_says_why_there_is_no_result(
    small: Way, rehearse: Callable[..., RunResult]
) -> None:
    with pytest.raises(StoppedError) as stopped:
        rehearse(CALIBRATE, seed=1, listener=Stopping(1))
    page = read(report(stopped.value.folder))
    assert "NO RESULT." in page.text
    assert page.table("Readings").rows[0][:2] == ["standard", "2"]


def test_a_failed_run_shows_its_last_exchanges_and_a_bench_that_cannot_be_read_is_no_obstacle(
    small: Way, tmp_path: Path
) -> None:
    with open_archive(small.hot) as archive:
        meta, first = archive.meta, next(archive.readings())
    said = {"instrument": "pump", "exchanges": [{"time_ns": 0, "sent": "<b>?", "received": "", "error": "no answer"}]}
    folder = tmp_path / "failed"
    folder.mkdir()
    with ArchiveWriter.create(folder, replace(meta, files={}, state="running")) as writer:
        writer.commit(first)
        writer.log(Event("exchanges", "last exchanges with pump", said))
        writer.log(Event("failure", "pump did not answer within 2 s", {"error": "NoAnswerError"}))
        writer.close("failed")
    page = read(report(folder))
    assert "The run failed. pump did not answer within 2 s." in page.text
    assert page.table("Last exchanges").rows == [["0.000", "<b>?", "", "no answer"]]
    assert "NO RESULT." in page.text
    assert str(tmp_path / "tmp") not in page.text
    assert page.table("Highest and lowest level").rows[0][4] == "none"


# Files


def test_nothing_is_overwritten(small: Way, tmp_path: Path) -> None:
    assert [report(small.hot).name for _ in range(3)] == ["report.html", "report-2.html", "report-3.html"]
    taken = tmp_path / "taken.html"
    taken.write_text("mine", "utf-8")
    with pytest.raises(FolderError, match="is there already, and nothing is overwritten"):
        report(small.hot, taken)
    assert taken.read_text("utf-8") == "mine"
    assert report(small.hot, tmp_path) == tmp_path / "report.html"
    with pytest.raises(FolderError, match="no run here"):
        report(tmp_path)


def test_the_command_prints_the_path(small: Way, capsys: pytest.CaptureFixture[str], tmp_path: Path) -> None:
    assert run_to_end(["report", str(small.hot), "--to", str(tmp_path / "r.html")]) == 0
    assert capsys.readouterr().out == f"{tmp_path / 'r.html'}\n"


# In a recipe, and without the extra


@pytest.fixture
def without(monkeypatch: pytest.MonkeyPatch) -> None:
    """A machine on which the extra is not installed."""
    monkeypatch.setattr(import_module("benchrun.save.report.libraries"), "find_spec", lambda name: None)


def test_a_recipe_can_ask_for_it(small: Way, rehearse: Callable[..., RunResult]) -> None:
    change(small.recipes, "  - summary: {}", "  - summary: {}\n  - report: {}")
    folder = rehearse(HOT, seed=1).folder
    page = read(folder / "report.html")
    assert_same(page, "drive +14.00 dBm", rows_of(folder)[:9])
    assert "COMPLETE." in page.text
    again = derive_again(folder, {})
    assert (again.folder / "report.html").is_file()


def test_without_the_extra_a_recipe_is_refused_at_its_place_before_anything_is_on(
    small: Way, rehearse: Callable[..., RunResult], worlds: Worlds, without: None
) -> None:
    assert check_files([small.recipes / HOT]) == []
    change(small.recipes, "  - summary: {}", "  - summary: {}\n  - report: {}")
    (problem,) = check_files([small.recipes / HOT])
    line = (small.recipes / HOT).read_text("utf-8").splitlines()[problem.line - 1]
    assert line[problem.column - 1 :] == "report: {}"
    assert "pip install 'benchrun[report]'" in problem.message
    with pytest.raises(FileProblemsError, match="a report needs jinja2 and plotly"):
        rehearse(HOT, seed=1)
    assert worlds.opened == []


def test_without_the_extra_the_command_says_in_one_line_what_to_install(
    small: Way, capsys: pytest.CaptureFixture[str], without: None
) -> None:
    assert run_to_end(["report", str(small.hot)]) == 2
    (line,) = capsys.readouterr().err.splitlines()
    assert "pip install 'benchrun[report]'" in line
    assert not (small.hot / "report.html").exists()


def test_without_the_extra_deriving_a_recipe_that_asks_for_it_leaves_nothing_half_made(
    small: Way, rehearse: Callable[..., RunResult], monkeypatch: pytest.MonkeyPatch
) -> None:
    change(small.recipes, "  - summary: {}", "  - summary: {}\n  - report: {}")
    folder = rehearse(HOT, seed=1).folder
    monkeypatch.setattr(import_module("benchrun.save.report.libraries"), "find_spec", lambda name: None)
    with pytest.raises(InputError, match=r"benchrun\[report\]"):
        derive_again(folder, {})
    assert not list(folder.glob("result-*"))


# In a browser


def drawn(path: Path, profile: Path) -> Page:
    """Open a page in a browser and return what it has become."""
    options = "--headless --no-sandbox --disable-gpu --virtual-time-budget=20000 --disable-background-networking"
    options += f" --disable-component-update --disable-sync --no-first-run --user-data-dir={profile}"
    command = [str(CHROMIUM), *options.split(), "--dump-dom", path.as_uri()]
    return Page(subprocess.run(command, capture_output=True, timeout=120, check=True).stdout.decode())


@pytest.mark.skipif(CHROMIUM is None, reason="no Chromium here")
def test_a_browser_unpacks_the_script_and_draws_every_chart(shared: Way, tmp_path: Path) -> None:
    page = drawn(report(shared.hot, tmp_path / "r.html"), tmp_path / "profile")
    assert "could not be drawn" not in page.text
    figures = [attributes for tag, attributes in page.elements if tag == "figure"]
    assert len(figures) >= 10
    assert all("js-plotly-plot" in str(attributes.get("class")) for attributes in figures)
    assert sum(tag == "select" for tag, _ in page.elements) == 3
    assert "Thick: drive +30.00 dBm. Ring: frequency 2300 MHz." in page.text


#: Choose, once everything is drawn, to show against drive at the first frequency; common practice, no source.
CHOOSE = """<script>
const wait = setInterval(() => {
  if (document.querySelectorAll("figure:not(.js-plotly-plot)").length) return;
  clearInterval(wait);
  const choose = (n, value) => { const s = document.querySelectorAll(".controls select")[n];
    s.value = value; s.dispatchEvent(new Event("change")); };
  choose(0, "0"); choose(2, "0");
}, 50);
</script></body>"""


@pytest.mark.skipif(CHROMIUM is None, reason="no Chromium here")
def test_a_reader_chooses_what_the_charts_show(shared: Way, tmp_path: Path) -> None:
    path = report(shared.hot, tmp_path / "r.html")
    path.write_text(path.read_text("utf-8").replace("</body>", CHOOSE), "utf-8")
    page = drawn(path, tmp_path / "profile")
    assert "Thick: frequency 2200 MHz. Ring: drive +30.00 dBm." in page.text
    assert "Output power against drive (AM-AM)" in page.text
    assert "with a ring at drive" in page.text
