"""A run on instruments that the tool takes for real: simulated ones behind HiSLIP, with no word of it in the file."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import closing
from dataclasses import dataclass
from pathlib import Path

import benchrun_sim
import numpy as np
import pytest
import skrf

from benchrun.acquire.prompts import Answer, Prompt, RefusingPrompter
from benchrun.archive import open_archive
from benchrun.bench import load_kit
from benchrun.errors import StoppedError
from benchrun.flow import ServedBench, run, show, simulate
from benchrun.flow.kit_prompts import with_label
from tests.flow.conftest import Way
from tests.flow.stage import BENCH, CALIBRATE, HOT, LEVEL, RECIPES, SMALL, Silence, recipes_in


class Person:
    """Somebody at the bench, who does what is asked with simulated connectors: `answers` first, then proceed."""

    available = True

    def __init__(self, served: ServedBench, *answers: Answer) -> None:
        self.prompts: list[Prompt] = []
        self._rack = served._served.rack  # type: ignore[attr-defined]
        self._answers = list(answers)

    def ask(self, prompt: Prompt) -> Answer:
        self.prompts.append(prompt)
        answer = self._answers.pop(0) if self._answers else "proceed"
        if answer == "proceed" and prompt.connect is not None:
            self._rack.connect(*prompt.connect)
        return answer


@dataclass(frozen=True)
class Real:
    """A bench that nothing tells from a real one."""

    recipes: Path
    runs: Path
    bench: Path
    served: ServedBench

    def run(self, recipe: str, *answers: Answer) -> tuple[Path, Person]:
        person = Person(self.served, *answers)
        result = run(self.recipes / recipe, self.runs, bench=self.bench, listener=Silence(), prompter=person)
        return result.folder, person


@pytest.fixture(scope="module")
def real(tmp_path_factory: pytest.TempPathFactory) -> Iterator[Real]:
    place = tmp_path_factory.mktemp("real")
    recipes = recipes_in(place / "recipes", SMALL)
    with closing(simulate(recipes / BENCH, 1, place / "real" / "real.bench.yaml")) as served:
        bench = place / "real" / "real.bench.yaml"
        lines = bench.read_text("utf-8").splitlines(keepends=True)
        bench.write_text(
            "".join(line for line in lines if not line.startswith(("simulated:", "rehearsal-channel:"))), "utf-8"
        )
        benchrun_sim.open_channel(served.channel).close()
        yield Real(recipes, place / "runs", bench, served)


@pytest.fixture(scope="module")
def calibrated(real: Real) -> tuple[Path, Person]:
    return real.run(CALIBRATE)


@pytest.fixture(scope="module")
def hot(real: Real, calibrated: tuple[Path, Person]) -> Path:
    real.run(LEVEL)
    return real.run(HOT)[0]


def test_the_person_is_asked_for_every_connection_with_rf_and_drain_read_back(calibrated: tuple[Path, Person]) -> None:
    _, person = calibrated
    assert [prompt.connect for prompt in person.prompts] == [
        ("output", what) for what in ("open", "short", "match", "offset-short-1", "offset-short-2", "meter", "device")
    ]
    for prompt in person.prompts:
        assert prompt.confirmed.startswith("RF off and drain off, read back at ")
        assert "Clean, gauge, torque to the connector's value." in prompt.cautions
        assert prompt.cautions[-1] == "Connector of Field kit, type N, 50 ohm: type N, torque 1.1 N m."


def test_a_kit_that_says_nothing_of_its_connectors_is_not_quoted() -> None:
    kit, _ = load_kit(RECIPES / "field-kit.kit.yaml")
    prompter = RefusingPrompter()
    assert kit is not None
    assert with_label(prompter, None) is prompter
    assert with_label(prompter, kit.model_copy(update={"connector": None})) is prompter
    assert not with_label(prompter, kit).available


def test_what_is_measured_is_called_real(hot: Path) -> None:
    document = show(hot)
    assert (document["state"], document["origin"], document["damage"]) == ("complete", "real", [])
    for path in hot.glob("touchstone/*.s1p"):
        assert "SIMULATED" not in path.read_text("iso-8859-1")


def test_it_gives_what_the_rehearsal_foretold(hot: Path, shared: Way) -> None:
    """The same bench at other times: other noise, other temperature; one seed."""
    files = sorted(path.name for path in (shared.hot / "touchstone").iterdir())
    assert sorted(path.name for path in (hot / "touchstone").iterdir()) == files
    for name in files:
        foretold, found = (skrf.Network(str(folder / "touchstone" / name)).s for folder in (shared.hot, hot))
        assert np.max(np.abs(found - foretold)) < 0.006, name


def test_nobody_and_nothing_came_to_harm(real: Real, hot: Path) -> None:
    world = real.served._served.rack.world  # type: ignore[attr-defined]
    assert world.damage == []
    assert not any(world.source(name).on for name in ("pump", "analyser"))
    assert not world.supplies.bias("drain").on


def test_who_stops_leaves_what_was_read(real: Real, calibrated: tuple[Path, Person]) -> None:
    with pytest.raises(StoppedError, match="the operator stopped at") as stopped:
        real.run(CALIBRATE, "proceed", "proceed", "stop")
    with open_archive(stopped.value.folder) as archive:  # type: ignore[attr-defined]
        assert (archive.count, archive.meta.state) == (2, "stopped")
        assert [reading.conditions["connected.output"] for reading in archive.readings()] == ["open", "short"]


def test_a_standard_that_is_skipped_is_not_made_up(real: Real, calibrated: tuple[Path, Person]) -> None:
    folder, _ = real.run(CALIBRATE, "proceed", "proceed", "proceed", "skip")
    with open_archive(folder) as archive:
        connected = [reading.conditions["connected.output"] for reading in archive.readings("standard")]
        assert connected == ["open", "short", "match", "offset-short-2"]
        (product,) = archive.products("calibration")
        assert list(product.document["residuals"]) == connected
