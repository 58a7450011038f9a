"""Output that never takes a measurement down: readers that leave, small encodings, closed streams, full disks."""

from __future__ import annotations

import io
import os
import subprocess
import sys
from pathlib import Path

import pytest

from benchrun.cli.streams import talk

#: A command line whose flow prints a lot; the run's exit code is 4, which must come through whatever happens to output.
LONG = """
import sys, types
import benchrun
from types import SimpleNamespace as N
benchrun.flow = sys.modules["benchrun.flow"] = N(
    rehearse=lambda *a, **k: N(
        folder="runs/x", exit_code=4, message="m" * 200_000, notes=["n" * 99] * 20_000,
        table=[{"name": "\\u00b5 \\u4e2d"}]
    )
)
from benchrun.cli.ending import run_to_end
sys.exit(run_to_end(["rehearse", "x.yaml", "--to", "runs"]))
"""


def start(**rest) -> subprocess.Popen[bytes]:
    return subprocess.Popen([sys.executable, "-W", "error", "-c", LONG], stdin=subprocess.DEVNULL, **rest)


@pytest.mark.skipif(os.name == "nt", reason="closed pipes are tested where they are signalled")
@pytest.mark.parametrize("stream", ["stdout", "stderr"])
def test_a_reader_that_leaves_changes_neither_exit_code_nor_says_anything(stream):
    other = {"stdout": "stderr", "stderr": "stdout"}[stream]
    process = start(stdout=subprocess.PIPE, stderr=subprocess.PIPE)
    getattr(process, stream).close()
    left = getattr(process, other).read().decode()
    getattr(process, other).close()
    assert process.wait(timeout=60) == 4
    assert "Broken" not in left
    assert "Traceback" not in left
    assert "Exception" not in left


def test_a_full_disk_behind_standard_output_is_a_disk_fault():
    if not Path("/dev/full").exists():
        pytest.skip("no /dev/full here")
    with Path("/dev/full").open("w") as full:
        process = start(stdout=full, stderr=subprocess.PIPE)
        said = process.communicate(timeout=60)[1].decode()
    assert process.returncode == 5
    assert "Standard output could not be written: No space left on device." in said
    assert "Traceback" not in said


@pytest.mark.parametrize("encoding", ["ascii", "cp1252", "utf-8"])
def test_any_encoding_will_do(encoding):
    process = start(stdout=subprocess.PIPE, stderr=subprocess.PIPE, env=os.environ | {"PYTHONIOENCODING": encoding})
    out, _err = process.communicate(timeout=60)
    assert process.returncode == 4
    assert out.decode(encoding).splitlines()[-1] == "runs/x"


def test_closed_streams_are_no_reason_to_fail():
    code = "import sys, os; os.close(1); os.close(2); os.execv(sys.executable, [sys.executable, '-c', sys.argv[1]])"
    assert subprocess.run([sys.executable, "-c", code, LONG], check=False, stdin=subprocess.DEVNULL).returncode == 4


def test_our_own_words_are_ascii():
    for path in (Path(__file__).parents[2] / "benchrun" / "cli").glob("*.py"):
        assert path.read_text(encoding="utf-8").isascii(), path


class Terminal(io.StringIO):
    """A text stream that says a person reads along."""

    def isatty(self) -> bool:
        return True


def alarm(monkeypatch, stream, **environment):
    monkeypatch.delenv("NO_COLOR", raising=False)
    monkeypatch.setenv("TERM", "xterm")
    for name, value in environment.items():
        monkeypatch.setenv(name, value)
    monkeypatch.setattr(sys, "stderr", stream)
    talk("PUMP NOT CONFIRMED", alarm=True)
    return stream.getvalue()


@pytest.mark.skipif(os.name == "nt", reason="no colour there")
def test_colour_only_adds(monkeypatch):
    plain = "PUMP NOT CONFIRMED\n"
    coloured = alarm(monkeypatch, Terminal())
    assert coloured != plain
    assert "PUMP NOT CONFIRMED" in coloured
    assert alarm(monkeypatch, io.StringIO()) == plain
    assert alarm(monkeypatch, Terminal(), NO_COLOR="1") == plain
    assert alarm(monkeypatch, Terminal(), TERM="dumb") == plain


def test_long_lines_fold_between_words_and_keep_their_indent(monkeypatch):
    monkeypatch.setattr(sys, "stderr", Terminal())  # 80 columns, where it does not say
    talk("  a.yaml:1:2: " + "word " * 30)
    lines = sys.stderr.getvalue().splitlines()
    assert max(map(len, lines)) <= 80
    assert [line[:6] for line in lines[1:]] == ["      "] * (len(lines) - 1)
    assert " ".join(" ".join(lines).split()) == "a.yaml:1:2: " + " ".join(["word"] * 30)
