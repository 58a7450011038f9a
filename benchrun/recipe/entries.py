"""The entries of a recipe's derive and save parts: a closed set, a model for each."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Annotated, Literal

from pydantic import BaseModel, Field

from benchrun.fields import Duration, Name
from benchrun.yaml_source import Strict

WEEK_S = 7 * 86400.0
Validity = Annotated[Duration, Field(gt=0.0, description="how long it may correct readings")]


class Correct(Strict):
    """Correct the raw waves of readings with a calibration."""

    readings: Name
    calibration: Name = Field(description="a name under `calibrations`")


class OnePort(Strict):
    """Reflection of corrected readings, as one port."""

    readings: Name


class HotMatch(Strict):
    """Hot S22 and T22 of corrected readings by the offset probe; `drive` names the levelled drive they refer to."""

    readings: Name
    drive: Name | None = Field(None, description="a name under `calibrations`; without it the bench's parts say")


class Calibrate(Strict):
    """Make a calibration of a plane from readings of standards and of a power meter."""

    name: Name
    plane: Literal["input", "output"]
    standards: Name = Field(description="the readings of the standards")
    power: Name | None = Field(None, description="the readings beside a power meter; without them waves have no scale")
    valid_for: Validity = WEEK_S


class LevelChain(Strict):
    """Make the table of what a signal's chain delivers at a plane, from power meter readings."""

    name: Name
    signal: Name
    plane: Literal["input", "output"]
    readings: Name
    valid_for: Validity = WEEK_S


class SaveTouchstone(Strict):
    """Write Touchstone files."""


class SaveSummary(Strict):
    """Write summary.csv."""


class SaveReport(Strict):
    """Write report.html, which opens offline."""


DERIVE: Mapping[str, type[BaseModel]] = {
    "correct": Correct,
    "one-port": OnePort,
    "hot-match": HotMatch,
    "calibrate": Calibrate,
    "level": LevelChain,
}
SAVE: Mapping[str, type[BaseModel]] = {"touchstone": SaveTouchstone, "summary": SaveSummary, "report": SaveReport}
#: Fields of derive entries that name readings.
OF_READINGS = ("readings", "standards", "power")
