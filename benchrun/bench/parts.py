"""Parts of a bench: what stands between instruments and planes, and what each of them bears."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from benchrun.bench.ranges import PositiveRatio
from benchrun.bench.ratios import FloatArray, Gain, Loss, ratio_at, ratio_text
from benchrun.fields import Level
from benchrun.yaml_source import Strict


class _Part(Strict):
    """What all parts share: limits of the level at their input (`linear` at the output of an amplifier)."""

    linear: Level | None = Field(None, description="up to this level it does not compress")
    damage: Level | None = Field(None, description="above this level at its input it may be damaged")

    def transmission_db(self, frequency_hz: FloatArray) -> FloatArray:
        """Return the gain (dB, negative for a loss) from one side to the other."""
        raise NotImplementedError

    @property
    def summary(self) -> str:
        """The part in a word or two: '10 dB'."""
        raise NotImplementedError


class _Lossy(_Part):
    kind: str
    loss: Loss

    def transmission_db(self, frequency_hz: FloatArray) -> FloatArray:
        """Return minus the loss (dB)."""
        return -ratio_at(self.loss, frequency_hz)

    @property
    def summary(self) -> str:
        """Loss and kind."""
        return f"{ratio_text(self.loss)} {self.kind}"


class Passive(_Lossy):
    """A pad, a cable, an adapter or a filter."""

    kind: Literal["pad", "cable", "adapter", "filter"]


class Isolator(_Lossy):
    """An isolator: `loss` forward, `isolation` in reverse."""

    kind: Literal["isolator"]
    isolation: PositiveRatio


class Coupler(_Lossy):
    """A dual directional coupler: `loss` of its main line."""

    kind: Literal["coupler"]
    coupling: PositiveRatio
    directivity: PositiveRatio

    @property
    def summary(self) -> str:
        """Coupling, directivity and loss."""
        return f"{self.coupling:g} dB coupler, directivity {self.directivity:g} dB, loss {ratio_text(self.loss)}"


class Amplifier(_Part):
    """An amplifier: `linear` is at its output, `damage` at its input."""

    kind: Literal["amplifier"]
    gain: Gain

    def transmission_db(self, frequency_hz: FloatArray) -> FloatArray:
        """Return the gain (dB)."""
        return ratio_at(self.gain, frequency_hz)

    @property
    def summary(self) -> str:
        """Gain and kind."""
        return f"{ratio_text(self.gain)} amplifier"


Part = Annotated[Passive | Isolator | Coupler | Amplifier, Field(discriminator="kind")]
