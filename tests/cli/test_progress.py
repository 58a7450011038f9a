"""What is seen of a run: one live line on a terminal, a line every half minute elsewhere."""

from __future__ import annotations

import os
import re
import subprocess
import sys

import pytest

from benchrun.cli.progress import CALM_INTERVAL_S, Line, TerminalProgress, Varying

LINE = Line("sweep", "drive +24.0 dBm  frequency 2.318 GHz", 0.64, 8.0, 780.0, 3)


def conditions(drive_dbm, frequency_hz):
    return {
        "probe.level_dbm": 8.0, "drive_dbm": drive_dbm, "frequency_hz": frequency_hz,
        "probe.frequency_hz": frequency_hz, "pump.frequency_hz": frequency_hz - 7e6,
    }  # fmt: skip


def test_elsewhere_a_line_comes_every_half_minute_at_most(capsys):
    time_s = [0.0]
    progress = TerminalProgress(lambda: time_s[0])
    progress.begin("Hot output match", 1000, "Simulated.")
    progress.phase("sweep", "")
    for index in range(1000):
        time_s[0] += 0.1
        progress.reading(index, 1000, conditions(14.0, 2.2e9 + index), time_s[0], 100 - time_s[0], 0.0, ())
    progress.end()
    lines = capsys.readouterr().err.splitlines()
    assert lines[:2] == ["Hot output match", "Simulated."]
    assert len(lines) == 2 + int(100 / CALM_INTERVAL_S)
    assert " 30 %" in lines[2]
    assert "1:10 left" in lines[2]


def test_phases_and_messages_stay(capsys):
    with TerminalProgress() as progress:
        progress.begin("Title", 1, "")
        progress.phase("bring-up", "gate -2.8 V")
        progress.phase("sweep", "")
        progress.message("asked again")
    assert capsys.readouterr().err.splitlines() == ["Title", "bring-up   gate -2.8 V", "asked again"]


def test_a_run_of_no_readings_is_no_division_by_zero(capsys):
    progress = TerminalProgress(lambda: 0.0)
    progress.begin("Title", 0, "")
    progress.reading(0, 0, {}, 0.0, 0.0, 0.0, ())


def test_sweeps_are_shown_and_what_follows_them_is_not():
    varying = Varying()
    for drive_dbm in (14.0, 15.0):
        for frequency_hz in (2.2e9, 2.3e9):
            varying.see(conditions(drive_dbm, frequency_hz))
    assert varying.names() == ["drive_dbm", "frequency_hz"]


def test_a_swept_quantity_of_the_bench_is_shown_too():
    varying = Varying()
    for level_dbm in (-15.0, -11.0):
        for frequency_hz in (2.2e9, 2.3e9, 2.4e9):
            varying.see({"pump.level_dbm": level_dbm, "frequency_hz": frequency_hz, "pump.frequency_hz": frequency_hz})
    assert varying.names() == ["pump.level_dbm", "frequency_hz"]


@pytest.mark.parametrize("width", [None, *range(10, 140, 7)])
def test_the_line_fits_and_always_says_how_far(width):
    text = LINE.fitted(width)
    assert "64 %" in text
    assert width is None or len(text) <= width


def test_a_wide_line_says_everything():
    assert LINE.fitted(120) == (
        "sweep      drive +24.0 dBm  frequency 2.318 GHz  #######.....   64 %  0:08 left"
        "  (13 min of bench time)  3 flagged"
    )


TERMINAL = """
import sys
from benchrun.cli.progress import TerminalProgress
from benchrun.cli.streams import guard_standard_streams
guard_standard_streams()
now = iter(range(1000))
with TerminalProgress(lambda: next(now)) as progress:
    progress.begin("Title", 3, "")
    progress.phase("sweep", "")
    for index in range(3):
        progress.reading(index, 3, {"standard": "open"}, 0.0, 0.0, 0.0, ())
    progress.message("stays")
    progress.reading(2, 3, {"standard": "open"}, 0.0, 0.0, 0.0, ())
print("runs/x")
"""


@pytest.mark.skipif(os.name == "nt", reason="pseudo-terminals are POSIX")
def test_on_a_terminal_the_live_line_is_gone_at_the_end_and_the_cursor_is_there():
    import pty

    here, there = pty.openpty()
    process = subprocess.Popen(
        [sys.executable, "-c", TERMINAL],
        stdin=subprocess.DEVNULL,
        stdout=there,
        stderr=there,
        env=os.environ | {"TERM": "xterm"},
    )
    os.close(there)
    written = b""
    while True:
        try:
            piece = os.read(here, 65536)
        except OSError:  # Linux says EIO where others say end of file
            break
        if not piece:
            break
        written += piece
    os.close(here)
    assert process.wait(timeout=60) == 0
    text = written.decode()
    assert " 33 %" in text
    assert text.rfind("\x1b[?25h") > text.rfind("\x1b[?25l")
    assert text.rindex("stays") < text.rindex("100 %") < text.rindex("\x1b[2K") < text.rindex("runs/x")
    assert not re.search(r"\x1b\[[0-9;]*m", text), "no colour is needed"


def test_it_is_what_an_acquisition_reports_to():
    """The protocol's methods, with the same parameters: mypy checks their types where flow is called."""
    import inspect

    from benchrun.acquire.progress import Progress

    for name, method in inspect.getmembers(Progress, inspect.isfunction):
        if not name.startswith("_"):
            assert inspect.signature(getattr(TerminalProgress, name)) == inspect.signature(method), name
