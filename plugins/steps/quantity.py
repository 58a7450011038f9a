"""What the built-in steps' models share: texts that are quantities of one kind, or sums of them with references."""

from __future__ import annotations

from typing import Annotated

from pydantic import AfterValidator, Field, StrictFloat, StrictInt, StrictStr

from benchrun.contract.kinds import Kind
from benchrun.errors import QuantityError
from benchrun.fields import Duration
from benchrun.quantities import example, parse


def _quantity(kind: Kind) -> tuple[AfterValidator, object]:
    """Return what checks a text without a reference now; one with a reference has a value only where it stands."""

    def check(text: str) -> str:
        if "{" in text:
            return text
        try:
            parse(text, kind)
        except QuantityError as error:
            raise ValueError(str(error)) from None
        return text

    described = f"{kind} with its unit, or a sum with references"
    return AfterValidator(check), Field(description=described, examples=[example(kind)])


Frequency = Annotated[str, *_quantity("frequency")]
Voltage = Annotated[str, *_quantity("voltage")]
Current = Annotated[str, *_quantity("current")]
#: A time to wait: not negative, and at most a week.
Wait = Annotated[Duration, Field(ge=0.0, le=7 * 86400.0)]
#: A quantity of whatever kind its target has; checked where the step stands.
AnyQuantity = Annotated[StrictStr | StrictInt | StrictFloat, Field(examples=["8 dBm", "{frequency} - 7 MHz"])]
Name = Annotated[str, Field(pattern=r"^[A-Za-z][A-Za-z0-9-]*$", examples=["hot"])]
#: Full name of a quantity on the bench: "pump.level", or "drive".
FullName = Annotated[
    str, Field(pattern=r"^[A-Za-z0-9][A-Za-z0-9_-]*(\.[A-Za-z][A-Za-z0-9-]*)*$", examples=["drain.current"])
]
