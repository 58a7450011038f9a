"""The JSON Schema of a file's model, for editors."""

from __future__ import annotations

from typing import Any

from pydantic import BaseModel
from pydantic.json_schema import GenerateJsonSchema, JsonSchemaValue
from pydantic_core import core_schema


class _Written(GenerateJsonSchema):
    """Describes files as people write them: a default in SI is none of a text with a unit, so it is left out."""

    def default_schema(self, schema: core_schema.WithDefaultSchema) -> JsonSchemaValue:
        """Leave out defaults that an editor would take for what may be written."""
        described = super().default_schema(schema)
        default = described.get("default")
        if isinstance(default, float | dict) or default is None:
            described.pop("default", None)
        return described


def json_schema(model: type[BaseModel], reference: str = "#/$defs/{model}") -> dict[str, Any]:
    """Return the JSON Schema (2020-12) of what a file of this model holds."""
    return model.model_json_schema(by_alias=True, ref_template=reference, schema_generator=_Written)
