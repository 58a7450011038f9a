"""Pydantic fields that read quantities with their units, for every model of a file."""

from __future__ import annotations

from typing import Annotated, Any

from pydantic import BeforeValidator, Field, GetJsonSchemaHandler
from pydantic.json_schema import JsonSchemaValue
from pydantic_core import core_schema

from benchrun.contract.kinds import Kind
from benchrun.errors import QuantityError
from benchrun.quantities import example, parse


class QuantityOf:
    """Marks a float field as a quantity of a kind: read by quantities.parse, described as such in the JSON Schema."""

    def __init__(self, kind: Kind) -> None:
        self.kind = kind

    def read(self, given: Any) -> float:
        """Return the float; what is a float already (a model made by a program) stays. Raises ValueError with our message."""
        try:
            return parse(given, self.kind)
        except QuantityError as error:
            raise ValueError(str(error)) from None

    def __get_pydantic_core_schema__(self, source: Any, handler: Any) -> core_schema.CoreSchema:
        """Read before the float is checked."""
        return core_schema.no_info_before_validator_function(self.read, handler(source))

    def __get_pydantic_json_schema__(self, schema: core_schema.CoreSchema, handler: GetJsonSchemaHandler) -> JsonSchemaValue:
        """Describe the text that people write."""
        if self.kind in ("number", "count"):
            return {"type": "integer" if self.kind == "count" else "number", "description": f"a {self.kind}, without a unit"}
        return {"type": "string", "description": f"{self.kind} with its unit", "examples": [example(self.kind)]}


Frequency = Annotated[float, QuantityOf("frequency")]
Level = Annotated[float, QuantityOf("level")]
Ratio = Annotated[float, QuantityOf("ratio")]
Voltage = Annotated[float, QuantityOf("voltage")]
Current = Annotated[float, QuantityOf("current")]
Power = Annotated[float, QuantityOf("power")]
Duration = Annotated[float, QuantityOf("time")]
Temperature = Annotated[float, QuantityOf("temperature")]
TemperatureDifference = Annotated[float, QuantityOf("temperature-difference")]
Angle = Annotated[float, QuantityOf("angle")]
Resistance = Annotated[float, QuantityOf("resistance")]
Capacitance = Annotated[float, QuantityOf("capacitance")]
Inductance = Annotated[float, QuantityOf("inductance")]
OffsetLoss = Annotated[float, QuantityOf("offset-loss")]
Number = Annotated[float, QuantityOf("number")]
Count = Annotated[int, QuantityOf("count")]


def _name(given: Any) -> Any:
    return str(given) if isinstance(given, int) and not isinstance(given, bool) else given


#: A name of something on the bench or in a recipe: a word with hyphens, never a path.
Name = Annotated[str, BeforeValidator(_name), Field(pattern=r"^[A-Za-z0-9][A-Za-z0-9_-]{0,63}$")]
#: A plain text, such as a serial number or a title.
Text = Annotated[str, BeforeValidator(_name), Field(max_length=400)]
