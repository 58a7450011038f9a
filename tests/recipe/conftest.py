"""A recipe in one page, for mistakes to be put into, against the example bench and the built-in steps."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest
from benchrun_plugins.steps import STEPS

from benchrun.bench import Bench, load_bench
from benchrun.contract.hooks import StepSpec
from benchrun.recipe import Recipe, load_recipe

RECIPE = """\
benchrun: 1
title: Hot output match
bench: balloon-driver.bench.yaml
kit: field-kit.kit.yaml
device: {part: HD-31, serial: 0042}
calibrations: {output-plane: calibrate.recipe.yaml, drive: level.recipe.yaml}
receiver: {if-bandwidth: 300 Hz}
acquire:
  - bring-up: {gate: -2.8 V, drain: 28 V}
  - set: {probe.level: 8 dBm}
  - sweep: {drive: {from: 14 dBm, to: 30 dBm, step: 1 dB}}
    do:
      - sweep: {frequency: {from: 2.2 GHz, to: 2.4 GHz, points: 81}}
        do:
          - set: {probe.frequency: "{frequency}", pump.frequency: "{frequency} - 7 MHz"}
          - settle: 20 ms
          - read: {name: hot, tones: [probe, pump, image], also: [drain.current]}
  - sweep: {standard: [open, short, match]}
    do:
      - connect: {plane: output, what: "{standard}"}
      - read: {name: standards, over: {frequency: {from: 2.2 GHz, to: 2.4 GHz, points: 81}}}
derive:
  - correct: {readings: hot, calibration: output-plane}
  - hot-match: {readings: hot, drive: drive}
  - calibrate: {name: output-plane, plane: output, standards: standards}
save:
  - touchstone: {}
  - summary:
"""
Told = Callable[..., list[str]]


@pytest.fixture(scope="session")
def steps() -> dict[str, StepSpec]:
    """The built-in steps."""
    return {step.key: step for step in STEPS}


@pytest.fixture(scope="session")
def example_bench(recipes: Path) -> Bench:
    """The bench of the examples."""
    bench, _ = load_bench(recipes / "balloon-driver.bench.yaml")
    assert bench is not None
    return bench


@pytest.fixture
def told(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, example_bench: Bench, steps: dict[str, StepSpec]) -> Told:
    """Return what is told of the recipe after replacements: told(old, new, old, new, ...)."""
    monkeypatch.chdir(tmp_path)

    def tell(*changes: str, with_bench: bool = True) -> list[str]:
        recipe, problems = load_recipe(_written(*changes), example_bench if with_bench else None, steps)
        assert (recipe is None) == bool(problems)
        return [str(problem) for problem in problems]

    return tell


@pytest.fixture
def recipe(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, example_bench: Bench, steps: dict[str, StepSpec]
) -> Callable[..., Recipe]:
    """Return the recipe after replacements, which must leave it right."""
    monkeypatch.chdir(tmp_path)

    def make(*changes: str) -> Recipe:
        made, problems = load_recipe(_written(*changes), example_bench, steps)
        assert problems == []
        assert made is not None
        return made

    return make


def _written(*changes: str) -> Path:
    text = RECIPE
    for old, new in zip(changes[::2], changes[1::2], strict=True):
        assert old in text
        text = text.replace(old, new, 1)
    path = Path("r.recipe.yaml")
    path.write_text(text, "utf-8")
    return path
