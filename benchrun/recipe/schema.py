"""The JSON Schema of recipe files, for editors: the outer form, and each step and entry by its key."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from pydantic import BaseModel

from benchrun.contract.hooks import StepSpec
from benchrun.recipe.entries import DERIVE, SAVE
from benchrun.recipe.model import RecipeFile
from benchrun.yaml_source import json_schema

_VALUE = {"type": ["string", "number"], "description": "a quantity with its unit", "examples": ["14 dBm", "2.2 GHz"]}


def recipe_schema(steps: Mapping[str, StepSpec]) -> dict[str, Any]:
    """Return the schema of a *.recipe.yaml file with the installed step kinds."""
    schema = json_schema(RecipeFile)
    definitions: dict[str, Any] = schema.setdefault("$defs", {})
    acquire = [_one_key(key, spec.model, definitions, spec.help) for key, spec in steps.items()]
    definitions["step"] = {"oneOf": [*acquire, _sweep()]}
    properties = schema["properties"]
    properties["acquire"] = {"type": "array", "items": {"$ref": "#/$defs/step"}, "minItems": 1}
    for part, models in (("derive", DERIVE), ("save", SAVE)):
        entries = [_one_key(key, model, definitions, (model.__doc__ or "").strip()) for key, model in models.items()]
        properties[part] = {"type": "array", "items": {"oneOf": entries}}
    return schema


def _one_key(key: str, model: type[BaseModel], definitions: dict[str, Any], text: str) -> dict[str, Any]:
    """Return the schema of {key: what the model says}; definitions are kept by key, so that models may share names."""
    inner = json_schema(model, f"#/$defs/{key}.{{model}}")
    definitions.update({f"{key}.{name}": definition for name, definition in inner.pop("$defs", {}).items()})
    definitions[key] = inner
    return {
        "type": "object",
        "description": text,
        "properties": {key: {"$ref": f"#/$defs/{key}"}},
        "required": [key],
        "additionalProperties": False,
    }


def _sweep() -> dict[str, Any]:
    over = {"oneOf": [{"type": "array", "items": _VALUE, "minItems": 1}, _range("step"), _range("points")]}
    return {
        "type": "object",
        "description": "Do the steps at each value; sweeps nest, outermost first.",
        "properties": {
            "sweep": {"type": "object", "minProperties": 1, "maxProperties": 1, "additionalProperties": over},
            "do": {"type": "array", "items": {"$ref": "#/$defs/step"}, "minItems": 1},
        },
        "required": ["sweep", "do"],
        "additionalProperties": False,
    }


def _range(by: str) -> dict[str, Any]:
    each = {"type": "integer", "minimum": 1} if by == "points" else _VALUE
    return {
        "type": "object",
        "properties": {"from": _VALUE, "to": _VALUE, by: each},
        "required": ["from", "to", by],
        "additionalProperties": False,
    }
