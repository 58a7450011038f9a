"""Files against their models: every mistake at once, each at its place, in words."""

from __future__ import annotations

from typing import Annotated, Literal

import pytest
from pydantic import BaseModel, Field, ValidationInfo, field_validator

from benchrun.errors import Problem
from benchrun.fields import Count, FileName, Frequency, Level, Name, Text
from benchrun.yaml_source import Strict, check, json_schema, read_text


class Round(Strict):
    kind: Literal["round"]
    radius: Annotated[Count, Field(ge=1)]


class Square(Strict):
    kind: Literal["square"]
    side_length: Frequency


class Thing(Strict):
    title: Text
    level: Level = -10.0
    shape: Annotated[Round | Square, Field(discriminator="kind")] | None = None
    pair: tuple[Level, Level] | None = None
    names: dict[Name, int] = Field(default={})
    way: Literal["in", "out"] = "in"
    on: bool = False
    file: FileName | None = None
    several: tuple[Count, ...] = Field(default=(), max_length=2)


def told(text: str) -> list[str]:
    checked, problems = check(read_text(text, "f.yaml"), Thing)
    assert (checked is None) == bool(problems)
    return [str(problem) for problem in problems]


def test_a_right_file_is_a_model() -> None:
    text = "title: A\nlevel: -3 dBm\nshape: {kind: square, side-length: 2 GHz}\npair: [1 dBm, 2 dBm]\n"
    thing, problems = check(read_text(text, "f.yaml"), Thing)
    assert problems == []
    assert thing is not None
    assert (thing.level, thing.pair) == (-3.0, (1.0, 2.0))
    assert isinstance(thing.shape, Square)
    assert thing.shape.side_length == 2e9


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("title: A\nlevle: -3 dBm\n", "f.yaml:2:1: 'levle' is not known here. Did you mean 'level'?"),
        (
            "title: A\nshape: {kind: round, radius: 1, xyz: 2}\n",
            "f.yaml:2:33: 'xyz' is not known here. Known: kind, radius.",
        ),
        ("level: -3 dBm\n", "f.yaml:1:1: 'title' is missing here."),
        ("title: A\nshape: {kind: round}\n", "f.yaml:2:1: 'radius' is missing here."),
        (
            "title: A\nlevel: 3,5 dBm\n",
            "f.yaml:2:8: '3,5 dBm' is not a quantity: the decimal mark is a point. Did you mean 3.5 dBm?",
        ),
        ("title: A\nlevel: -3\n", "f.yaml:2:8: '-3' has no unit: a level is written with one, like -10 dBm."),
        ("title: A\nlevel:\n", "f.yaml:2:1: a level is missing here; it is written like -10 dBm."),
        (
            "title: A\nshape: {kind: rund, radius: 1}\n",
            "f.yaml:2:15: 'rund' is not known here; expected: round, square. Did you mean 'round'?",
        ),
        ("title: A\nshape: {radius: 1}\n", "f.yaml:2:8: 'kind' is missing here."),
        ("title: A\nshape: 3\n", "f.yaml:2:8: a mapping (key: value) is expected here, not '3'."),
        ("title: A\nshape: {kind: round, radius: 0}\n", "f.yaml:2:30: '0' must be at least 1."),
        ("title: A\npair: [1 dBm]\n", "f.yaml:2:1: value 2 of this list is missing."),
        ("title: A\npair: 1 dBm\n", "f.yaml:2:7: a list is expected here, not '1 dBm'."),
        ("title: A\npair: [1 dBm, 2 dB]\n", "f.yaml:2:15: '2 dB' is a ratio, where a level is expected, like -10 dBm."),
        ("title: A\nnames: {'a b': 1}\n", "f.yaml:2:9: 'a b' is not a name: letters, digits and hyphens."),
        ("title: A\nway: inn\n", "f.yaml:2:6: 'inn' is not known here; expected: in, out. Did you mean 'in'?"),
        ("title: A\non: perhaps\n", "f.yaml:2:5: true or false is expected here, not 'perhaps'."),
        (
            "title: 4.20\n",
            "f.yaml:1:8: '4.2' is a number or a switch, and a text is expected here: put it into quotes.",
        ),
        ("title: [A]\n", "f.yaml:1:8: a text is expected here, not a list."),
        ("title: A\nfile: ../x\n", "f.yaml:2:7: '../x' is not the name of a file beside this one."),
        ("title: A\nseveral: [1, 2, 3]\n", "f.yaml:2:10: this holds 3 values; at most 2 are expected."),
        ("- title\n", "f.yaml:1:1: a mapping (key: value) is expected here, not a list."),
        (
            "title: {name}\n",
            'f.yaml:1:8: a text is expected here, not a mapping (a reference is written in quotes: "{name}").',
        ),
    ],
)
def test_one_mistake_is_told_at_its_place(text: str, message: str) -> None:
    assert told(text) == [message]


def test_all_mistakes_are_told_at_once_in_order() -> None:
    text = "titel: A\nlevel: 3,5 dBm\nshape: {kind: round, radus: 2}\npair: [x, 1 GHz]\n"
    assert told(text) == [
        "f.yaml:1:1: 'titel' is not known here. Did you mean 'title'?",
        "f.yaml:1:1: 'title' is missing here.",
        "f.yaml:2:8: '3,5 dBm' is not a quantity: the decimal mark is a point. Did you mean 3.5 dBm?",
        "f.yaml:3:1: 'radius' is missing here.",
        "f.yaml:3:22: 'radus' is not known here. Did you mean 'radius'?",
        "f.yaml:4:8: 'x' is not a quantity; a level is written like -10 dBm.",
        "f.yaml:4:11: '1 GHz' is a frequency, where a level is expected, like -10 dBm.",
    ]


def test_models_of_others_are_checked_as_well() -> None:
    class Foreign(BaseModel, extra="forbid"):
        count: int | str | None = None
        must: float

    source = read_text("steps:\n  - foreign: {count: [1], cuont: 3, must: x}\n", "f.yaml")
    _, problems = check(source, Foreign, ("steps", 0, "foreign"), source.data["steps"][0]["foreign"])
    assert [(problem.line, problem.column) for problem in problems] == [(2, 22), (2, 27), (2, 43)]
    assert problems[1].message == "'cuont' is not known here."


def test_validators_find_the_context_they_are_given() -> None:
    class Asking(Strict):
        name: str

        @field_validator("name")
        @classmethod
        def _known(cls, name: str, info: ValidationInfo) -> str:
            if name not in (info.context or {})["known"]:
                raise ValueError("nobody is called so")
            return name

    source = read_text("name: x\n", "f.yaml")
    assert check(source, Asking, context={"known": ["x"]})[1] == []
    assert check(source, Asking, context={"known": []})[1] == [Problem("f.yaml", 1, 7, "nobody is called so.")]


def test_schema_describes_what_people_write() -> None:
    schema = json_schema(Thing)
    assert schema["properties"]["level"]["type"] == "string"
    assert "default" not in schema["properties"]["level"]
    assert schema["additionalProperties"] is False
    assert "side-length" in schema["$defs"]["Square"]["properties"]
