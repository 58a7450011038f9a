"""Ways gone to their end once for many tests, and copies of them for the tests that change something."""

from __future__ import annotations

import shutil
from collections.abc import Callable
from dataclasses import dataclass, replace
from importlib import import_module
from pathlib import Path

import pytest

from benchrun import flow
from tests.faults.flow.worlds import Worlds
from tests.flow.stage import CALIBRATE, HOT, LEVEL, SMALL, Changes, Silence, recipes_in


@dataclass(frozen=True)
class Way:
    """Recipes, the folder of runs that they were rehearsed into, and the runs; the worlds, one for each rehearsal."""

    recipes: Path
    runs: Path
    hot: Path
    result: flow.RunResult
    messages: tuple[str, ...]
    worlds: Worlds

    @property
    def calibration(self) -> Path:
        """The run of the output plane's calibration."""
        return self._run(CALIBRATE)

    @property
    def levelling(self) -> Path:
        """The run that levelled the drive."""
        return self._run(LEVEL)

    def _run(self, recipe: str) -> Path:
        (found,) = self.runs.glob(f"*_bench_{recipe.removesuffix('.recipe.yaml')}")
        return found


@pytest.fixture(scope="session")
def demo(tmp_path_factory: pytest.TempPathFactory) -> Way:
    """The demo as it is shipped, seed 1, for everybody: change nothing in it."""
    return _gone(tmp_path_factory.mktemp("demo"), ())


@pytest.fixture(scope="session")
def shared(tmp_path_factory: pytest.TempPathFactory) -> Way:
    """The demo with three drives and nine frequencies, seed 1, for everybody: change nothing in it."""
    return _gone(tmp_path_factory.mktemp("small"), SMALL)


@pytest.fixture
def small(shared: Way, tmp_path: Path) -> Way:
    """A copy of the small demo, to be changed."""
    recipes, runs = (Path(shutil.copytree(old, tmp_path / old.name)) for old in (shared.recipes, shared.runs))
    return replace(shared, recipes=recipes, runs=runs, hot=runs / shared.hot.name)


@pytest.fixture
def worlds(monkeypatch: pytest.MonkeyPatch) -> Worlds:
    """Every world that a rehearsal opens from here on."""
    found = Worlds()
    monkeypatch.setattr(import_module("benchrun.flow.rehearse"), "rehearsal_plugin", lambda: found)
    return found


@pytest.fixture
def rehearse(small: Way) -> Callable[..., flow.RunResult]:
    """Rehearse a recipe of the copied small demo into its runs."""

    def rehearse(recipe: str, *, listener: Silence | None = None, **how: object) -> flow.RunResult:
        runs = how.pop("to", small.runs)
        return flow.rehearse(small.recipes / recipe, runs, listener=listener or Silence(), **how)  # type: ignore[arg-type]

    return rehearse


def _gone(place: Path, changes: Changes) -> Way:
    worlds, listener = Worlds(), Silence()
    recipes, runs = recipes_in(place / "recipes", changes), place / "runs"
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(import_module("benchrun.flow.rehearse"), "rehearsal_plugin", lambda: worlds)
        result = flow.rehearse(recipes / HOT, runs, seed=1, listener=listener)
    return Way(recipes, runs, result.folder, result, tuple(listener.messages), worlds)
