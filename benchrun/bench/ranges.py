"""Ranges and bounded quantities that the models of bench files share."""

from __future__ import annotations

from typing import Annotated

from pydantic import AfterValidator, Field

from benchrun.fields import Current, Duration, Frequency, Level, Number, OffsetLoss, Ratio, Resistance, Voltage


def _rising(pair: tuple[float, float]) -> tuple[float, float]:
    if pair[0] >= pair[1]:
        raise ValueError("a range is written [lowest, highest]; these two do not rise")
    return pair


FrequencyRange = Annotated[tuple[Frequency, Frequency], AfterValidator(_rising)]
LevelRange = Annotated[tuple[Level, Level], AfterValidator(_rising)]
VoltageRange = Annotated[tuple[Voltage, Voltage], AfterValidator(_rising)]
Fraction = Annotated[Number, Field(ge=0.0, le=1.0)]
PositiveRatio = Annotated[Ratio, Field(gt=0.0)]
PositiveCurrent = Annotated[Current, Field(gt=0.0)]
PositiveVoltage = Annotated[Voltage, Field(gt=0.0)]
PositiveResistance = Annotated[Resistance, Field(gt=0.0)]
NotNegativeDuration = Annotated[Duration, Field(ge=0.0)]
NotNegativeLoss = Annotated[OffsetLoss, Field(ge=0.0)]
