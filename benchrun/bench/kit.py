"""A calibration kit: its standards as its label defines them."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Annotated, Any, Literal

from pydantic import BeforeValidator, Field, PrivateAttr, WithJsonSchema

from benchrun.bench.ranges import NotNegativeDuration, NotNegativeLoss, PositiveResistance
from benchrun.contract.kinds import Kind
from benchrun.errors import QuantityError
from benchrun.fields import FileName, Form, Name, Text
from benchrun.quantities import example, parse_coefficient
from benchrun.yaml_source import Strict

MOST_COEFFICIENTS = 4


def _coefficients(kind: Kind) -> tuple[BeforeValidator, WithJsonSchema]:
    """Read a polynomial over frequency: the n-th coefficient (from 0) is in the unit per Hz^n."""

    def read(given: Any) -> Any:
        if not isinstance(given, list) or not 1 <= len(given) <= MOST_COEFFICIENTS:
            raise ValueError(f"a list of 1 to {MOST_COEFFICIENTS} coefficients is expected, like [{example(kind)}]")
        try:
            return tuple(parse_coefficient(text, kind, order) for order, text in enumerate(given))
        except QuantityError as error:
            raise ValueError(str(error)) from None

    schema = {
        "type": "array",
        "items": {"type": "string"},
        "maxItems": MOST_COEFFICIENTS,
        "examples": [[example(kind)]],
    }
    return BeforeValidator(read), WithJsonSchema(schema)


Capacitances = Annotated[tuple[float, ...], *_coefficients("capacitance")]
Inductances = Annotated[tuple[float, ...], *_coefficients("inductance")]


class _Offset(Strict):
    """The line between the plane and what ends it."""

    delay: NotNegativeDuration = Field(0.0, description="one way")
    loss: NotNegativeLoss = Field(0.0, description="at 1 GHz; it rises with the root of frequency")
    line_impedance: PositiveResistance = 50.0

    def _line(self) -> dict[str, Any]:
        return {"delay_s": self.delay, "loss_ohm_per_s": self.loss, "line_impedance_ohm": self.line_impedance}


def _given(name: str, coefficients: tuple[float, ...] | None) -> dict[str, Any]:
    return {} if coefficients is None else {name: list(coefficients)}


class Open(_Offset):
    """An open: its fringing capacitance over frequency."""

    kind: Literal["open"]
    capacitance: Capacitances | None = None

    def plain(self) -> dict[str, Any]:
        """Return the definition in SI."""
        return {"kind": self.kind, **self._line(), **_given("capacitance", self.capacitance)}


class Short(_Offset):
    """A short, flush or offset: its inductance over frequency."""

    kind: Literal["short"]
    inductance: Inductances | None = None

    def plain(self) -> dict[str, Any]:
        """Return the definition in SI."""
        return {"kind": self.kind, **self._line(), **_given("inductance", self.inductance)}


class Match(_Offset):
    """A match: its resistance, and its inductance over frequency."""

    kind: Literal["match"]
    resistance: PositiveResistance = 50.0
    inductance: Inductances | None = None

    def plain(self) -> dict[str, Any]:
        """Return the definition in SI."""
        more = _given("inductance", self.inductance)
        return {"kind": self.kind, **self._line(), "resistance_ohm": self.resistance, **more}


class Measured(Strict):
    """A standard that is defined by data: a one-port Touchstone file."""

    kind: Literal["data"]
    file: FileName = Field(description="Touchstone file beside the kit file", examples=["sliding-short.s1p"])

    def plain(self) -> dict[str, Any]:
        """Return the definition; the file's text is in Kit.files."""
        return {"kind": self.kind, "file": self.file}


Standard = Annotated[Open | Short | Match | Measured, Field(discriminator="kind")]


class Connector(Strict):
    """The kit's connector, for the operator."""

    type: Text
    torque: Annotated[str, Form(r"[0-9]+(\.[0-9]+)? N m", "a torque, such as 1.1 N m")] | None = None


class Kit(Strict):
    """A *.kit.yaml file."""

    benchrun: Literal[1]
    title: Text
    impedance: PositiveResistance = 50.0
    connector: Connector | None = None
    standards: dict[Name, Standard] = Field(min_length=1)
    _path: Path = PrivateAttr(default=Path("kit.yaml"))
    _text: str = PrivateAttr(default="")
    _files: Mapping[str, str] = PrivateAttr(default_factory=dict)

    def remember(self, path: Path, text: str, files: Mapping[str, str]) -> None:
        """Keep where the kit came from; for the loader."""
        self._path, self._text, self._files = path, text, files

    @property
    def path(self) -> Path:
        """The kit file."""
        return self._path

    @property
    def text(self) -> str:
        """The kit file as read."""
        return self._text

    @property
    def files(self) -> Mapping[str, str]:
        """Texts of the Touchstone files that the kit names, by name; a run keeps them, to be corrected again later."""
        return self._files

    @property
    def impedance_ohm(self) -> float:
        """Reference impedance in ohm."""
        return self.impedance

    def plain(self) -> dict[str, dict[str, Any]]:
        """Return each standard's definition by name in SI, as derive takes it."""
        return {name: standard.plain() for name, standard in self.standards.items()}
