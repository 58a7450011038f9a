"""The JSON Schema of recipe files, for editors: the outer form, and each step and entry by its key."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

from pydantic import BaseModel

from benchrun.contract.hooks import StepSpec
from benchrun.recipe.model import DERIVE, SAVE, RecipeFile

_QUANTITY = {"type": ["string", "number"], "description": "a quantity with its unit"}


def recipe_schema(steps: Mapping[str, StepSpec]) -> dict[str, Any]:
    """Return the schema of a *.recipe.yaml file with the installed step kinds."""
    schema = RecipeFile.model_json_schema(by_alias=True)
    definitions: dict[str, Any] = schema.setdefault("$defs", {})
    acquire = [_one_key(key, spec.model, definitions, spec.help) for key, spec in steps.items()]
    definitions["Step"] = {"oneOf": [*acquire, _sweep()]}
    properties = schema["properties"]
    properties["acquire"] = {"type": "array", "items": {"$ref": "#/$defs/Step"}, "minItems": 1}
    for part, models in (("derive", DERIVE), ("save", SAVE)):
        entries = [_one_key(key, model, definitions, (model.__doc__ or "").strip()) for key, model in models.items()]
        properties[part] = {"type": "array", "items": {"oneOf": entries}}
    return schema


def _one_key(key: str, model: type[BaseModel], definitions: dict[str, Any], text: str) -> dict[str, Any]:
    inner = model.model_json_schema(by_alias=True, ref_template="#/$defs/{model}")
    definitions.update(inner.pop("$defs", {}))
    definitions[model.__name__] = inner
    return {
        "type": "object",
        "description": text,
        "properties": {key: {"$ref": f"#/$defs/{model.__name__}"}},
        "required": [key],
        "additionalProperties": False,
    }


def _sweep() -> dict[str, Any]:
    ranges = {
        "type": "object",
        "properties": {"from": _QUANTITY, "to": _QUANTITY, "step": _QUANTITY, "points": {"type": "integer", "minimum": 1}},
        "required": ["from", "to"],
        "additionalProperties": False,
    }
    over = {"oneOf": [{"type": "array", "items": _QUANTITY, "minItems": 1}, ranges]}
    return {
        "type": "object",
        "description": "Do the steps at each value, outermost sweep first.",
        "properties": {
            "sweep": {"type": "object", "minProperties": 1, "maxProperties": 1, "additionalProperties": over},
            "do": {"type": "array", "items": {"$ref": "#/$defs/Step"}, "minItems": 1},
        },
        "required": ["sweep", "do"],
        "additionalProperties": False,
    }
