"""Pydantic fields that every model of a file shares: quantities with their units, names, texts, file names."""

from __future__ import annotations

import re
from collections.abc import Callable
from typing import Annotated, Any

from pydantic import AfterValidator, BeforeValidator, GetJsonSchemaHandler
from pydantic.json_schema import JsonSchemaValue
from pydantic_core import core_schema

from benchrun.contract.kinds import Kind
from benchrun.errors import QuantityError
from benchrun.quantities import example, parse, pattern


class QuantityOf:
    """Marks a float field as a quantity of a kind: read by quantities.parse, described as such in the JSON Schema."""

    def __init__(self, kind: Kind) -> None:
        self.kind = kind

    def read(self, given: Any) -> float:
        """Return the float. Raises ValueError with our message."""
        try:
            return parse(given, self.kind)
        except QuantityError as error:
            raise ValueError(str(error)) from None

    def __get_pydantic_core_schema__(self, source: Any, handler: Any) -> core_schema.CoreSchema:
        """Read before the float is checked."""
        return core_schema.no_info_before_validator_function(self.read, handler(source))

    def __get_pydantic_json_schema__(
        self, schema: core_schema.CoreSchema, handler: GetJsonSchemaHandler
    ) -> JsonSchemaValue:
        """Describe the text that people write."""
        if self.kind in ("number", "count"):
            return handler(schema)
        return quantity_schema(self.kind)


def quantity_schema(kind: Kind) -> dict[str, Any]:
    """Return the JSON Schema of a quantity that is written with its unit."""
    description = f"{kind.replace('-', ' ')} with its unit"
    return {"type": "string", "description": description, "pattern": pattern(kind), "examples": [example(kind)]}


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


class Form:
    """Marks a text field as one of a form; says in words what is wrong with another."""

    def __init__(self, regular_expression: str, words: str) -> None:
        self.expression, self.words = regular_expression, words

    def check(self, text: str) -> str:
        """Return the text. Raises ValueError with our message."""
        if not re.fullmatch(self.expression, text):
            raise ValueError(f"'{text[:60]}' is not {self.words}")
        return text

    def __get_pydantic_core_schema__(
        self, source: Any, handler: Callable[[Any], core_schema.CoreSchema]
    ) -> core_schema.CoreSchema:
        """Check after it is known to be a text."""
        return core_schema.no_info_after_validator_function(self.check, handler(source))

    def __get_pydantic_json_schema__(
        self, schema: core_schema.CoreSchema, handler: GetJsonSchemaHandler
    ) -> JsonSchemaValue:
        """Give the form to editors."""
        return {**handler(schema), "pattern": f"^(?:{self.expression})$"}


def _at_most(length: int) -> AfterValidator:
    def check(text: str) -> str:
        if len(text) > length:
            raise ValueError(f"this text is longer than {length} characters")
        return text

    return AfterValidator(check)


def _whole_number_as_text(given: Any) -> Any:
    """Take `serial: 42` for the text that it is: the YAML reader takes for whole numbers only what str() writes so."""
    return str(given) if isinstance(given, int) and not isinstance(given, bool) else given


#: A name of something on the bench or in a recipe.
Name = Annotated[
    str,
    BeforeValidator(_whole_number_as_text),
    Form(r"[A-Za-z0-9][A-Za-z0-9_-]{0,63}", "a name: letters, digits and hyphens"),
]
#: A plain text on one line, such as a serial number or a title.
Text = Annotated[
    str,
    BeforeValidator(_whole_number_as_text),
    Form(r"[^\x00-\x08\x0b-\x1f\x7f]*", "a plain text (it holds control characters)"),
    _at_most(400),
]
#: A file beside the one that names it: never a way to another folder.
FileName = Annotated[str, Form(r"[^/\\\x00-\x1f:]{1,200}", "the name of a file beside this one")]
#: A file by its way from the folder of the one that names it.
FilePath = Annotated[str, Form(r"[^\x00-\x1f]{1,400}", "the name of a file")]
