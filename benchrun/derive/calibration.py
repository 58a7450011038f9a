"""A calibration of a plane: error terms and scale on a grid, with everything that says where they hold."""

from __future__ import annotations

import datetime
from collections.abc import Mapping, Sequence
from dataclasses import asdict, dataclass, field, fields
from typing import Any

import numpy as np
import numpy.typing as npt

from benchrun.contract.capture import ComplexArray, FloatArray
from benchrun.derive.interpolation import interpolate, outside
from benchrun.derive.one_port import ErrorTerms
from benchrun.errors import CalibrationError
from benchrun.quantities import show

DOCUMENT_VERSION = 1


@dataclass(frozen=True, slots=True)
class Circumstances:
    """Under which circumstances something was calibrated or levelled; what decides whether it fits another run.

    Times are UTC as ISO 8601 text. `origin` is "real" or "simulated, seed N". `part_hash` covers the parts between the
    plane and the receivers and `parts` describes them (name to text), so that a difference can be named.
    `reference_ohm` is the kit's impedance: what a plane's corrected reflections refer to.
    """

    made_utc: str
    valid_until_utc: str
    origin: str
    part_hash: str
    parts: Mapping[str, str] = field(default_factory=dict)
    temperature_degc: float | None = None
    kit: str = ""
    power_meter: str = ""
    readings_hash: str = ""
    version: str = ""
    reference_ohm: float = 50.0

    def require(
        self, who: str, part_hash: str, date_utc: str, origin: str, parts: Mapping[str, str] | None = None
    ) -> None:
        """Raise CalibrationError, naming `who` and why, where this does not fit a run's parts, date or origin."""
        if origin != self.origin:
            raise CalibrationError(f"{who} {_origin_reason(self.origin, origin)}")
        if part_hash != self.part_hash:
            raise CalibrationError(f"{who} was made with other parts{self._difference(parts or {})}")
        made, until, date = (_moment(text) for text in (self.made_utc, self.valid_until_utc, date_utc))
        if date > until:
            raise CalibrationError(
                f"{who} expired on {_show(until)}; the readings are of {_show(date)}. Calibrate again."
            )
        if date < made - (until - made):
            raise CalibrationError(
                f"{who} was made on {_show(made)}, long after the readings of {_show(date)}. Choose an older one."
            )

    def _difference(self, parts: Mapping[str, str]) -> str:
        """Return ': P3 was 20 dB; the bench now has 10 dB there ...' as far as descriptions tell."""
        changed = [k for k in [*self.parts, *parts] if self.parts.get(k) != parts.get(k)]
        if not parts or not changed:
            return " between plane and receivers than the bench has now. Calibrate again, or put the old parts back."
        told = [
            f"{k} was {self.parts.get(k, 'absent')}; the bench now has {parts.get(k, 'nothing')} there"
            for k in dict.fromkeys(changed)
        ]
        return f": {'; '.join(told)}. Calibrate again, or put the old parts back."


@dataclass(frozen=True, slots=True)
class Calibration:
    """Error terms (F,) and |K| (F,) of `plane` on `frequency_hz` (F,), with the circumstances under which they hold.

    `scale` is |K| without unit, or None where no power meter was read: then only ratios can be corrected. `residuals`
    is, for each standard, the rms over frequency of corrected minus defined reflection.
    """

    name: str
    plane: str
    frequency_hz: FloatArray
    terms: ErrorTerms
    scale: FloatArray | None
    residuals: Mapping[str, float]
    circumstances: Circumstances

    def at(self, frequency_hz: npt.ArrayLike) -> ErrorTerms:
        """Return the error terms at `frequency_hz` (N,), by cubics on their real and imaginary parts.

        Raises CalibrationError where the grid does not reach.
        """
        self._require_grid(frequency_hz)
        stacked = np.stack([self.terms.e00, self.terms.e11, self.terms.e10e01])
        return ErrorTerms(*interpolate(self.frequency_hz, stacked, frequency_hz))

    def scale_at(self, frequency_hz: npt.ArrayLike) -> FloatArray:
        """Return |K| at `frequency_hz` (N,). Raises CalibrationError off the grid, and where no power was read.

        The phase of K is free but must be smooth over the tones of one reading; it is taken as 0 everywhere.
        """
        scale = self.require_scale()
        self._require_grid(frequency_hz)
        return interpolate(self.frequency_hz, scale, frequency_hz)

    def require_scale(self) -> FloatArray:
        """Return |K| (F,). Raises CalibrationError where no power was read."""
        if self.scale is None:
            raise CalibrationError(
                f"{self._who} has no absolute scale: its recipe read no power meter. Calibrate again with one."
            )
        return self.scale

    def check_fits(
        self,
        frequency_hz: npt.ArrayLike,
        part_hash: str,
        plane: str,
        date_utc: str,
        origin: str,
        parts: Mapping[str, str] | None = None,
    ) -> None:
        """Raise CalibrationError, saying which, where this calibration does not fit.

        Checked: that it is of `plane`, real for a real run and of the same seed for a simulated one, made through parts
        of the same `part_hash`, valid at `date_utc` (ISO 8601), and that its grid covers every tone in `frequency_hz`.
        """
        if plane != self.plane:
            raise CalibrationError(f"{self._who} is of the {self.plane} plane; the {plane} plane is to be corrected.")
        self.circumstances.require(self._who, part_hash, date_utc, origin, parts)
        self._require_grid(frequency_hz)

    @property
    def _who(self) -> str:
        return f"calibration '{self.name}'"

    def _require_grid(self, frequency_hz: npt.ArrayLike) -> None:
        wanted = np.atleast_1d(np.asarray(frequency_hz, dtype=np.float64))
        if np.any(outside(self.frequency_hz, wanted)):
            raise CalibrationError(
                f"{self._who} covers {_range(self.frequency_hz)}; the tones of the readings, image included, run from "
                f"{_range(wanted)}. Calibrate over that range."
            )

    def to_document(self) -> dict[str, Any]:
        """Return everything as JSON-ready values; complex numbers as lists of real and imaginary parts."""
        return {
            "kind": "calibration",
            "document": DOCUMENT_VERSION,
            "name": self.name,
            "plane": self.plane,
            "frequency_hz": self.frequency_hz.tolist(),
            "terms": {f.name: _pair(getattr(self.terms, f.name)) for f in fields(ErrorTerms)},
            "scale": None if self.scale is None else self.scale.tolist(),
            "residuals": dict(self.residuals),
            "circumstances": asdict(self.circumstances),
        }

    @classmethod
    def from_document(cls, document: Mapping[str, Any]) -> Calibration:
        """Return what to_document wrote, equal to the last bit. Raises CalibrationError for anything else."""
        require_kind(document, "calibration")
        try:
            return cls(
                document["name"],
                document["plane"],
                np.asarray(document["frequency_hz"], dtype=np.float64),
                ErrorTerms(*(_unpair(document["terms"][f.name]) for f in fields(ErrorTerms))),
                None if document["scale"] is None else np.asarray(document["scale"], dtype=np.float64),
                dict(document["residuals"]),
                Circumstances(**document["circumstances"]),
            )
        except (KeyError, TypeError, ValueError) as error:
            raise CalibrationError(
                f"this calibration document is damaged ({error!r}). Derive it again from its run."
            ) from error


def require_kind(document: Mapping[str, Any], kind: str) -> None:
    """Raise CalibrationError unless `document` says it is one of ours, of this kind and version."""
    if document.get("kind") != kind:
        raise CalibrationError(
            f"a {kind} is expected here, and this document is a {document.get('kind', 'text of another kind')}."
        )
    if document.get("document") != DOCUMENT_VERSION:
        raise CalibrationError(
            f"this {kind} is written in form {document.get('document')}; this version reads form {DOCUMENT_VERSION}. "
            "Derive it again from its run."
        )


def valid_until(made_utc: str, valid_for_s: float) -> str:
    """Return the ISO 8601 UTC time `valid_for_s` seconds after `made_utc`."""
    return (_moment(made_utc) + datetime.timedelta(seconds=valid_for_s)).isoformat(timespec="seconds")


def _moment(text: str) -> datetime.datetime:
    try:
        moment = datetime.datetime.fromisoformat(text)
    except ValueError as error:
        raise CalibrationError(
            f"'{text}' is no time: ISO 8601 in UTC is expected, as in 2026-12-01T21:14:02Z."
        ) from error
    return moment if moment.tzinfo else moment.replace(tzinfo=datetime.UTC)


def show_time(text: str) -> str:
    """Return an ISO 8601 time as people read it: 2026-12-01 21:14 UTC."""
    return _show(_moment(text))


def _show(moment: datetime.datetime) -> str:
    return f"{moment.astimezone(datetime.UTC):%Y-%m-%d %H:%M} UTC"


def _origin_reason(have: str, want: str) -> str:
    if want == "real":
        return f"is {have}, and nothing simulated ever corrects a real run. Calibrate the real bench."
    return f"is {have}, and this run is {want}. Calibrate in the same world."


def _pair(values: ComplexArray) -> Sequence[Sequence[float]]:
    return [[float(z.real), float(z.imag)] for z in values]


def _unpair(values: Sequence[Sequence[float]]) -> ComplexArray:
    pairs = np.asarray(values, dtype=np.float64)
    return np.ascontiguousarray(pairs[:, 0] + 1j * pairs[:, 1])


def _range(frequency_hz: FloatArray) -> str:
    return f"{show(frequency_hz.min(), 'frequency', 7)} to {show(frequency_hz.max(), 'frequency', 7)}"
