"""One mistake hides no other: what is sound of a file is judged although something else in it is not."""

from __future__ import annotations

from pathlib import Path

import pytest

from benchrun.bench import load_bench
from benchrun.drivers.registry import load_registry
from benchrun.recipe import load_recipe

RECIPES = Path(__file__).parents[2] / "recipes"


def changed(folder: Path, name: str, *changes: tuple[str, str]) -> Path:
    text = (RECIPES / name).read_text("utf-8")
    for old, new in changes:
        assert old in text
        text = text.replace(old, new, 1)
    (folder / name).write_text(text, "utf-8")
    return folder / name


def test_a_wrong_quantity_of_a_bench_does_not_hide_what_is_wrong_between_its_parts(tmp_path: Path) -> None:
    path = changed(
        tmp_path,
        "balloon-driver.bench.yaml",
        ("ceiling: 10 dBm", "ceiling: 10 dB"),
        ("P1: {kind: pad, loss: 10 dB", "P1: {kind: pad, loss: 10,5 dB"),
        ("path: [booster, input-isolator], plane: input", "path: [boster, input-isolator], plane: input"),
        ("instrument: supply, channel: 2", "instrument: suply, channel: 2"),
    )
    bench, problems = load_bench(path)
    assert bench is None
    told = "\n".join(str(problem) for problem in problems)
    for part in ("'10 dB' is a ratio", "10.5 dB?", "'boster'", "'suply'"):
        assert part in told
    assert len(problems) == 4, told


def test_a_wrong_word_of_a_recipe_does_not_hide_what_is_wrong_between_its_parts(tmp_path: Path) -> None:
    path = changed(
        tmp_path,
        "hot-output-match.recipe.yaml",
        ("averages: 1", "avrages: 1"),
        ("points: 81", "points: many"),
        ("calibration: output-plane}", "calibration: outputplane}"),
    )
    bench, _ = load_bench(RECIPES / "balloon-driver.bench.yaml")
    recipe, problems = load_recipe(path, bench, load_registry().steps)
    assert recipe is None
    told = "\n".join(str(problem) for problem in problems)
    for part in ("'avrages'", "many", "'outputplane'"):
        assert part in told
    assert len(problems) == 3, told


@pytest.mark.parametrize("text", ["[]", "a", "benchrun: 1", "instruments: 3", "benchrun: 1\ndevice: {gain: 3,5 dB}"])
def test_too_little_that_is_sound_is_told_as_before(tmp_path: Path, text: str) -> None:
    (tmp_path / "b.bench.yaml").write_text(text, "utf-8")
    bench, problems = load_bench(tmp_path / "b.bench.yaml")
    assert bench is None
    assert problems
