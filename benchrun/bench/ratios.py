"""Loss or gain of a part: one figure, a table over frequency, or a Touchstone file (|S21|)."""

from __future__ import annotations

from collections.abc import Sequence
from itertools import pairwise
from pathlib import Path
from typing import Annotated, Any

import numpy as np
import numpy.typing as npt
from pydantic import BeforeValidator, Field, ValidationInfo, WithJsonSchema

from benchrun.bench import touchstone
from benchrun.bench.touchstone import read_beside
from benchrun.errors import QuantityError
from benchrun.fields import quantity_schema
from benchrun.quantities import parse, show
from benchrun.yaml_source import Strict

FloatArray = npt.NDArray[np.float64]
_PAIRS = "[[2.2 GHz, 10.1 dB], [2.4 GHz, 10.2 dB]]"


class OutsideTableError(QuantityError):
    """A frequency lies outside a part's table; a table is never extrapolated."""


class RatioTable(Strict):
    """Ratio in dB over frequency in Hz, rising; `file` names the Touchstone file where it came from one."""

    frequency_hz: tuple[float, ...]
    ratio_db: tuple[float, ...]
    file: str | None = None

    def at(self, frequency_hz: npt.ArrayLike) -> FloatArray:
        """Return the ratio in dB, interpolated linearly, in the shape of `frequency_hz`.

        Raises OutsideTableError where a frequency lies outside the table.
        """
        wanted = np.asarray(frequency_hz, dtype=np.float64)
        low, high = self.frequency_hz[0], self.frequency_hz[-1]
        beyond = wanted[(wanted < low) | (wanted > high)]
        if beyond.size:
            raise OutsideTableError(
                f"the table runs from {show(low, 'frequency')} to {show(high, 'frequency')}, and "
                f"{show(float(beyond.flat[0]), 'frequency')} lies outside; a table is never extrapolated"
            )
        return np.asarray(np.interp(wanted, self.frequency_hz, self.ratio_db))

    def __str__(self) -> str:
        low, high = min(self.ratio_db), max(self.ratio_db)
        return f"{show(low, 'ratio', 2)} to {show(high, 'ratio', 2)} (table)"


def ratio_at(ratio: float | RatioTable, frequency_hz: npt.ArrayLike) -> FloatArray:
    """Return a part's loss or gain in dB, in the shape of `frequency_hz`. Raises OutsideTableError."""
    if isinstance(ratio, RatioTable):
        return ratio.at(frequency_hz)
    return np.full(np.shape(frequency_hz), ratio)


def ratio_text(ratio: float | RatioTable) -> str:
    """Return a part's loss or gain for a person: '10 dB', or the span of its table."""
    return str(ratio) if isinstance(ratio, RatioTable) else show(ratio, "ratio")


def _read(given: Any, info: ValidationInfo, sign: float) -> float | RatioTable:
    if isinstance(given, RatioTable):
        return given
    try:
        if isinstance(given, dict):
            return _from_file(given, info, sign)
        if isinstance(given, list):
            return _from_pairs(given)
        return parse(given, "ratio")
    except QuantityError as error:
        raise ValueError(str(error)) from None


def _from_pairs(given: Sequence[Any]) -> RatioTable:
    if len(given) < 2 or any(not isinstance(pair, list) or len(pair) != 2 for pair in given):
        raise ValueError(f"a table has two rows or more of a frequency and a ratio: {_PAIRS}")
    frequency = tuple(parse(pair[0], "frequency") for pair in given)
    if any(later <= earlier for earlier, later in pairwise(frequency)):
        raise ValueError("the frequencies of a table must rise from row to row")
    return RatioTable(frequency_hz=frequency, ratio_db=tuple(parse(pair[1], "ratio") for pair in given))


def _from_file(given: dict[str, Any], info: ValidationInfo, sign: float) -> RatioTable:
    if set(given) != {"file"} or not isinstance(given["file"], str):
        raise ValueError("a Touchstone file is given as {file: NAME.s2p}")
    context = info.context or {}
    text = read_beside(context.get("folder", Path()), given["file"])
    context.get("files", {})[given["file"]] = text
    return _from_touchstone(text, sign, given["file"])


def _from_touchstone(text: str, sign: float, name: str) -> RatioTable:
    """Return 20 log10 |S21| of a two-port Touchstone file, times `sign`. Raises ValueError with our message."""
    frequency_hz, s = touchstone.parse(name, text, ports=2)
    size = np.abs(s[:, 1, 0])
    if size.size < 2 or np.any(size <= 0.0):
        raise ValueError(f"'{name}': two frequencies or more, and S21 above zero at each, are needed")
    table = sign * 20.0 * np.log10(size)
    return RatioTable(frequency_hz=tuple(frequency_hz.tolist()), ratio_db=tuple(table.tolist()), file=name)


def _loss(given: Any, info: ValidationInfo) -> float | RatioTable:
    read = _read(given, info, -1.0)
    lowest = min(read.ratio_db) if isinstance(read, RatioTable) else read
    if lowest < (-0.1 if isinstance(read, RatioTable) and read.file else 0.0):
        raise ValueError(f"a loss is written without a sign: {show(lowest, 'ratio')} would be a gain")
    return read


def _gain(given: Any, info: ValidationInfo) -> float | RatioTable:
    return _read(given, info, 1.0)


_SCHEMA = WithJsonSchema(
    {
        "anyOf": [
            quantity_schema("ratio"),
            {
                "type": "array",
                "items": {"type": "array", "items": {"type": "string"}},
                "examples": [[["2.2 GHz", "10.1 dB"]]],
            },
            {
                "type": "object",
                "properties": {"file": {"type": "string"}},
                "required": ["file"],
                "additionalProperties": False,
            },
        ]
    }
)
Loss = Annotated[
    float | RatioTable, BeforeValidator(_loss), _SCHEMA, Field(description="one figure, a table, or {file: NAME.s2p}")
]
Gain = Annotated[
    float | RatioTable, BeforeValidator(_gain), _SCHEMA, Field(description="one figure, a table, or {file: NAME.s2p}")
]
