"""The whole tool against simulated worlds that the test can look into and break."""

from __future__ import annotations

import shutil
from importlib import import_module
from pathlib import Path

import pytest

from tests.cli.conftest import benchrun_command
from tests.faults.flow.worlds import Worlds

__all__ = ["benchrun_command"]

RECIPES = Path(__file__).parents[3] / "recipes"


@pytest.fixture
def recipes(tmp_path: Path) -> Path:
    """The demo's recipes and bench, to be spoilt."""
    return Path(shutil.copytree(RECIPES, tmp_path / "recipes", ignore=shutil.ignore_patterns("pictures")))


@pytest.fixture
def worlds(monkeypatch: pytest.MonkeyPatch) -> Worlds:
    """Every world that the product opens from here on."""
    found = Worlds()
    monkeypatch.setattr(import_module("benchrun.flow.rehearse"), "rehearsal_plugin", lambda: found)
    return found
