"""Dialect files: every mistake at its place, and what is left open."""

from __future__ import annotations

from pathlib import Path

import pytest

from benchrun.drivers.dialects import dialect_for, load_dialect
from benchrun.drivers.registry import Registry
from benchrun.errors import FileProblemsError

RECIPES = Path(__file__).parents[2] / "recipes"


def test_every_example_is_sound() -> None:
    files = sorted(RECIPES.glob("*.dialect.yaml"))
    assert files
    for path in files:
        assert load_dialect(path)[1] == []


def test_what_the_standard_leaves_open(registry: Registry) -> None:
    with pytest.raises(
        FileProblemsError, match=r"capture, data, limits, offsets, source-port, waves.*name a dialect file"
    ):
        dialect_for(registry.drivers["wave-receiver"], None)
    path = RECIPES / "simulated-wave-receiver.dialect.yaml"
    dialect = dialect_for(registry.drivers["wave-receiver"], path)
    assert dialect["waves"].set_text({"receivers": ("R3", "R4")}) == "SENS:REC:LIST R3,R4"
    assert (dialect.options, dialect.filter_periods) == (True, 1.2)


def test_all_mistakes_at_once_each_at_its_place(tmp_path: Path, registry: Registry) -> None:
    path = tmp_path / "bad.dialect.yaml"
    path.write_text(
        "benchrun: 1\n"
        "entries:\n"
        "  frequency:\n"
        "    set: SOURce:FREQuency {frequency}; *RST\n"
        "    deadline: 3 parsec\n"
        "  level: {ask: 'SOURce:POWer'}\n"
        "  lvel: {set: 'SOURce:POWer {level}'}\n"
        "timing: {piont: 1 ms}\n"
    )
    text, problems = load_dialect(path)
    assert text is None
    told = [str(problem).removeprefix(str(path)) for problem in problems]
    assert [one.split(" ")[0] for one in told] == [":4:10:", ":5:15:", ":6:16:", ":8:10:"]
    assert "is not one command" in told[0]
    assert "parsec" in told[1]
    assert "'piont' is not known here. Did you mean 'point'?" in told[3]
    path.write_text(
        "benchrun: 1\n"
        "entries:\n"
        "  lvel: {set: 'SOURce:POWer {level}', carries: {level: level}}\n"
        "  level:\n"
        "    tolerance: 1 V\n"
        "  output: {carries: {onn: switch}}\n"
    )
    with pytest.raises(FileProblemsError) as caught:
        dialect_for(registry.drivers["signal-source"], path)
    told = [str(problem).removeprefix(str(path)) for problem in caught.value.problems]
    assert [one.split(" ")[0] for one in told] == [":3:3:", ":4:3:", ":6:22:"]
    assert "no entry 'lvel'" in told[0]
    assert "entry 'level'" in told[1]
    assert "never fills {onn}" in told[2]


@pytest.mark.parametrize("content", [None, b"\xff\xfe\x00", b"", b"- 1\n", b"benchrun: 2\n"])
def test_files_that_are_none(tmp_path: Path, content: bytes | None) -> None:
    path = tmp_path / "odd.dialect.yaml"
    if content is not None:
        path.write_bytes(content)
    text, problems = load_dialect(path)
    assert text is None
    assert problems
    assert all(problem.file == str(path) and problem.message for problem in problems)
