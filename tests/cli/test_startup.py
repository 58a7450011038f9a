"""`benchrun --help` and the shell's completion import nothing heavy and look for no plugins."""

from __future__ import annotations

import os
import subprocess
import sys

import pytest

HEAVY = {
    "pydantic",
    "pydantic_core",
    "numpy",
    "pyvisa",
    "pyvisa_py",
    "pyvisa_sim",
    "skrf",
    "scipy",
    "pandas",
    "rich",
    "apsw",
    "pluggy",
    "ruamel",
}
SCANS = {"importlib.metadata"}

PROBE = """
import sys
import benchrun.__main__ as entry
sys.argv = ["benchrun", *{arguments!r}]
try:
    entry.main()
finally:
    print("IMPORTED", *sys.modules, file=sys.stderr)
"""


def imported(*arguments: str, **environment: str) -> set[str]:
    ended = subprocess.run(
        [sys.executable, "-c", PROBE.format(arguments=list(arguments))],
        env=os.environ | environment, capture_output=True, text=True, check=False, stdin=subprocess.DEVNULL,
    )  # fmt: skip
    assert ended.returncode == 0, ended.stderr
    assert ended.stdout
    (line,) = (line for line in ended.stderr.splitlines() if line.startswith("IMPORTED"))
    return set(line.split()[1:])


@pytest.mark.parametrize("arguments", [["--help"], ["rehearse", "--help"], ["completion", "bash"]])
def test_nothing_heavy_is_imported(arguments):
    modules = imported(*arguments)
    assert "click" in modules
    assert not modules & (HEAVY | {"benchrun.flow", "benchrun_plugins", "benchrun_sim"})


@pytest.mark.parametrize("arguments", [["--help"], ["--version"]])
def test_no_entry_points_are_scanned(arguments):
    assert not imported(*arguments) & SCANS


def test_a_command_imports_only_its_own_module():
    modules = imported("rehearse", "--help")
    assert "benchrun.cli.rehearse" in modules
    assert "benchrun.cli.simulate" not in modules


def test_the_shell_completes_commands_without_heavy_imports():
    modules = imported(_BENCHRUN_COMPLETE="bash_complete", COMP_WORDS="benchrun re", COMP_CWORD="1")
    assert not modules & HEAVY


def test_the_shell_completes_commands():
    ended = subprocess.run(
        [sys.executable, "-m", "benchrun"],
        env=os.environ | {"_BENCHRUN_COMPLETE": "bash_complete", "COMP_WORDS": "benchrun reh", "COMP_CWORD": "1"},
        capture_output=True, text=True, check=True,
    )  # fmt: skip
    assert ended.stdout.split() == ["plain,rehearse"]


@pytest.mark.parametrize("shell", ["bash", "zsh", "fish"])
def test_completion_prints_a_script_for_each_shell(benchrun_command, shell):
    ended = benchrun_command("completion", shell)
    assert ended.code == 0
    assert "_BENCHRUN_COMPLETE" in ended.out
