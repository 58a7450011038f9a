"""What the tests of the whole way stand on: the recipes in a folder of their own, small where that will do, silence."""

from __future__ import annotations

import shutil
from collections.abc import Sequence
from pathlib import Path
from typing import Any

RECIPES = Path(__file__).parents[2] / "recipes"
HOT, COLD = "hot-output-match.recipe.yaml", "cold-output-reflection.recipe.yaml"
CALIBRATE, LEVEL = "calibrate-output-plane.recipe.yaml", "level-the-drive.recipe.yaml"
BENCH, DIALECT = "balloon-driver.bench.yaml", "simulated-wave-receiver.dialect.yaml"

Changes = Sequence[tuple[str, str]]
#: Three drives and nine frequencies in place of 17 and 81, and calibrations on grids to match.
SMALL: Changes = (
    ("points: 81", "points: 9"),
    ("step: 1 dB}}      # power", "step: 8 dB}}      # power"),
    ("points: 89", "points: 23"),
    ("points: 22", "points: 8"),
)
RETUNED: Changes = (("tones: coherent", "tones: retuned"),)


class Silence:
    """Progress that nobody watches; it keeps what it was told."""

    def __init__(self) -> None:
        self.messages: list[str] = []

    def message(self, text: str) -> None:
        """Keep a sentence."""
        self.messages.append(text)

    def begin(self, *told: Any) -> None:
        """Say nothing."""

    phase = reading = begin

    def pause(self) -> None:
        """Say nothing."""

    end = pause


def recipes_in(folder: Path, changes: Changes = ()) -> Path:
    """Copy the recipes to `folder` with texts replaced in all of them, each of which must occur, and return it."""
    shutil.copytree(RECIPES, folder, ignore=shutil.ignore_patterns("pictures", "*.md"))
    for old, new in changes:
        change(folder, old, new)
    return folder


def change(folder: Path, old: str, new: str) -> None:
    """Replace a text, which must occur, in every file of a folder of recipes."""
    touched = [path for path in sorted(folder.glob("*.yaml")) if old in path.read_text("utf-8")]
    assert touched, f"no file in {folder} holds {old!r}"
    for path in touched:
        path.write_text(path.read_text("utf-8").replace(old, new), "utf-8")
