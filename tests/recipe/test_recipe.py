"""What a right recipe says."""

from __future__ import annotations

import json
import re
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any

import pytest

from benchrun.bench import Bench, Kit, load_kit
from benchrun.contract.hooks import StepSpec
from benchrun.recipe import Recipe, Step, Sweep, files_named, load_recipe, recipe_source
from benchrun.recipe.acquire import AcquireReader
from benchrun.recipe.schema import recipe_schema
from benchrun.yaml_source import json_schema, read_text

Make = Callable[..., Recipe]


@pytest.mark.parametrize(
    "name", ["calibrate-output-plane", "cold-output-reflection", "hot-output-match", "level-the-drive"]
)
def test_the_examples_are_right(name: str, recipes: Path, example_bench: Bench, steps: dict[str, StepSpec]) -> None:
    recipe, problems = load_recipe(recipes / f"{name}.recipe.yaml", example_bench, steps)
    assert problems == []
    assert recipe is not None
    assert recipe.text == (recipes / f"{name}.recipe.yaml").read_text("utf-8")


def test_header(recipe: Make) -> None:
    made = recipe()
    assert (made.title, made.file.kit) == ("Hot output match", "field-kit.kit.yaml")
    assert made.device is not None
    # A serial number with leading zeros is a text, also without quotes.
    assert made.device.serial == "0042"
    assert dict(made.calibrations) == {"output-plane": "calibrate.recipe.yaml", "drive": "level.recipe.yaml"}
    assert (made.receiver.if_bandwidth, made.receiver.averages) == (300.0, 1)


def test_steps_and_sweeps_nest_as_written_and_keep_their_places(recipe: Make) -> None:
    bring_up, setting, drive, standard = recipe().acquire
    assert isinstance(bring_up, Step)
    assert isinstance(setting, Step)
    assert isinstance(drive, Sweep)
    assert isinstance(standard, Sweep)
    assert (bring_up.key, bring_up.at.line, bring_up.at.column) == ("bring-up", 9, 5)
    assert (drive.axis.name, drive.axis.kind, drive.axis.settable, len(drive.axis)) == ("drive", "level", True, 17)
    assert (drive.at.line, drive.at.column) == (11, 5)
    (frequency,) = drive.do
    assert isinstance(frequency, Sweep)
    assert (frequency.axis.name, frequency.axis.kind, frequency.axis.settable) == ("frequency", "frequency", False)
    assert [step.key for step in frequency.do if isinstance(step, Step)] == ["set", "settle", "read"]
    assert tuple(standard.axis.values) == ("open", "short", "match")


def test_derive_and_save(recipe: Make) -> None:
    made = recipe()
    assert [entry.kind for entry in made.derive] == ["correct", "hot-match", "calibrate"]
    assert made.derive[2].model.model_dump()["valid_for"] == 7 * 86400.0
    assert [entry.kind for entry in made.save] == ["touchstone", "summary"]


def test_the_outer_form_is_known_without_bench_or_steps(tmp_path: Path) -> None:
    path = tmp_path / "r.recipe.yaml"
    path.write_text("benchrun: 1\ntitle: T\nbench: b\nreceiver: {if-bandwidth: 1 kHz}\nacquire: [{x: 1}]\n", "utf-8")
    file, _, problems = recipe_source(path)
    assert problems == []
    assert file is not None
    assert (file.bench, file.kit) == ("b", None)


def test_the_files_that_it_names_are_known_whatever_else_is_wrong() -> None:
    source = read_text("bench: b.bench.yaml\nkit: [1]\ntitel: T\n", "r.recipe.yaml")
    assert files_named(source) == ("b.bench.yaml", None)
    assert files_named(read_text("- 1\n", "r.recipe.yaml")) == (None, None)


def test_what_decides_the_readings_is_hashed_and_nothing_else(recipe: Make) -> None:
    document = recipe().document()
    json.dumps(document, allow_nan=False)
    unchanged = recipe("title: Hot output match", "title: Other", "  - touchstone: {}\n", "", "2.2 GHz", "2200 MHz")
    assert unchanged.document() == document
    for change in (
        ("300 Hz", "1 kHz"),
        ("step: 1 dB", "step: 2 dB"),
        ("20 ms", "21 ms"),
        ("serial: 0042", "serial: 7"),
    ):
        assert recipe(*change).document() != document


def _objects(schema: Any) -> Iterator[dict[str, Any]]:
    if isinstance(schema, dict):
        yield schema
        for value in schema.values():
            yield from _objects(value)
    elif isinstance(schema, list):
        for value in schema:
            yield from _objects(value)


def test_the_schema_is_whole(steps: dict[str, StepSpec]) -> None:
    schema = recipe_schema(steps)
    json.dumps(schema, allow_nan=False)
    references = {found["$ref"] for found in _objects(schema) if isinstance(found.get("$ref"), str)}
    assert {reference.removeprefix("#/$defs/") for reference in references} <= set(schema["$defs"])
    keys = {key for one in schema["$defs"]["step"]["oneOf"] for key in one["properties"]}
    assert keys == {*steps, "sweep", "do"}
    for found in _objects(schema):
        if isinstance(found.get("pattern"), str):
            re.compile(found["pattern"])


@pytest.mark.parametrize("kind", ["recipe", "bench", "kit"])
def test_the_readme_documents_every_key(kind: str, recipes: Path, steps: dict[str, StepSpec]) -> None:
    schema = recipe_schema(steps) if kind == "recipe" else json_schema(Bench if kind == "bench" else Kit)
    keys = {
        key for found in _objects(schema) if isinstance(found.get("properties"), dict) for key in found["properties"]
    }
    text = (recipes / "README.md").read_text("utf-8")
    written = set(re.findall(r"[a-z0-9]+(?:-[a-z0-9]+)*", text))
    assert keys - written == set()


def test_the_examples_of_the_readme_are_right(
    recipes: Path, tmp_path: Path, example_bench: Bench, steps: dict[str, StepSpec]
) -> None:
    text = (recipes / "README.md").read_text("utf-8")
    blocks = [read_text(block, "README.md") for block in re.findall(r"```yaml\n(.*?)```", text, re.DOTALL)]
    lists = [block for block in blocks if isinstance(block.data, list)]
    kits = [block.text for block in blocks if "standards" in block.data]
    assert (len(blocks), len(lists), len(kits)) == (7, 2, 1)
    for block in lists:
        reader = AcquireReader(block, example_bench, steps)
        reader.items(block.data, ())
        assert reader.problems == []
    (tmp_path / "slide.s1p").write_text("# GHz S RI R 50\n2.0 0.5 0.1\n2.5 0.4 -0.1\n", "utf-8")
    (tmp_path / "k.kit.yaml").write_text(kits[0], "utf-8")
    assert load_kit(tmp_path / "k.kit.yaml")[1] == []
