"""From raw waves to waves at the calibrated plane: receiver linearity first, then error terms and scale."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

from benchrun.contract.capture import ComplexArray, FloatArray
from benchrun.derive.calibration import Calibration
from benchrun.derive.facts import BenchFacts
from benchrun.derive.linearity import image_bound, restore_pair, restore_weak
from benchrun.derive.one_port import ErrorTerms
from benchrun.derive.points import Points
from benchrun.errors import DataSetError

PROBE, PUMP, IMAGE = "probe", "pump", "image"


@dataclass(frozen=True, slots=True)
class Linear:
    """One raw wave with its receiver's compression taken out: an array (N,) in root-watt for each tone.

    `image_share` (N,) bounds how much of one sideband still stands in the other: 0 where the tones were coherent.
    `above` (N,) marks tones above the receiver's limit, `beyond` (N,) readings that the model cannot undo, left as
    they are.
    """

    tones: Mapping[str, ComplexArray]
    image_share: FloatArray
    above: npt.NDArray[np.bool_]
    beyond: npt.NDArray[np.bool_]


@dataclass(frozen=True, slots=True)
class Corrected:
    """Points with their waves at the plane: `b` out of the device and `a` into it, (N,) in root-watt for each tone.

    `leak` (N,) bounds, for each tone, what the other sideband may have left in `b` and into `a`, as a part of `a` at
    the probe: 0 where the tones were coherent. `flags` (N) are the readings' words and those found here.
    """

    points: Points
    calibration: Calibration
    b: Mapping[str, ComplexArray]
    a: Mapping[str, ComplexArray]
    leak: Mapping[str, FloatArray]
    flags: tuple[tuple[str, ...], ...]

    def reflection(self) -> ComplexArray:
        """Return b / a (N,) at the probe. Raises DataSetError where no wave went into the device."""
        dark = self.a[PROBE] == 0.0
        if np.any(dark):
            raise DataSetError(f"{self.points.place(int(np.argmax(dark)))}: no probe wave was read. Was the probe on?")
        return np.asarray(self.b[PROBE] / self.a[PROBE])


def restore(points: Points, wave: str, facts: BenchFacts) -> Linear:
    """Take the compression of `wave`'s receiver out of every tone (METHODS section 3).

    With a pump among the tones, the pump is the strong tone, and probe and image are a weak pair beside it: exactly
    undone where captured coherently, else without the false image, whose share is then bounded. Alone, each tone is
    its own.
    """
    receiver = facts.linearity[wave]
    raw = {tone: points.wave(tone, wave) for tone in points.tones}
    clear = np.zeros(len(points))
    if PUMP not in raw or len(raw) == 1:
        alone = {tone: receiver.restore(y) for tone, y in raw.items()}
        tones = {tone: x for tone, (x, _) in alone.items()}
        beyond = np.any([lost for _, lost in alone.values()], axis=0)
        return Linear(tones, clear, _above(tones, wave, facts), beyond)
    strong, beyond = receiver.restore(raw[PUMP])
    if points.coherent and {PROBE, IMAGE} <= raw.keys():
        upper, lower = restore_pair(receiver.kappa, strong, raw[PROBE], raw[IMAGE])
        tones = {PROBE: upper, PUMP: strong, IMAGE: lower}
        return Linear(tones, clear, _above(tones, wave, facts), beyond)
    weak = {tone: restore_weak(receiver.kappa, strong, y) for tone, y in raw.items() if tone != PUMP}
    tones = weak | {PUMP: strong}
    return Linear(tones, image_bound(receiver.kappa, strong), _above(tones, wave, facts), beyond)


def correct(points: Points, calibration: Calibration, facts: BenchFacts) -> Corrected:
    """Return the waves at the calibration's plane for every tone of `points` (METHODS section 2).

    Where the calibration has no absolute scale, waves are relative to the reference receiver and only their ratios at
    one tone mean anything. Raises CalibrationError where the grid does not reach, DataSetError where a wave is
    missing.
    """
    measured, reference = restore(points, facts.reflected, facts), restore(points, facts.incident, facts)
    b, a, leak = {}, {}, {}
    for tone in points.tones:
        f = points.tone_hz(tone)
        terms = calibration.at(f)
        scale = np.ones(len(points)) if calibration.scale is None else calibration.scale_at(f)
        b[tone], a[tone] = terms.waves(measured.tones[tone], reference.tones[tone], scale)
        leak[tone] = _leak(terms, scale, *(_left(wave, tone) for wave in (measured, reference)))
    leak = {tone: bound / np.maximum(np.abs(a[PROBE]), 1e-300) for tone, bound in leak.items()} if PROBE in a else {}
    flags = _flagged(points.flags, {facts.reflected: measured, facts.incident: reference})
    return Corrected(points, calibration, b, a, leak, flags)


def _left(wave: Linear, tone: str) -> FloatArray:
    """Return how much (N,) of the other sideband may still stand in `tone` of a raw wave."""
    other = wave.tones.get({PROBE: IMAGE, IMAGE: PROBE}.get(tone, ""))
    return np.zeros(wave.image_share.shape) if other is None else wave.image_share * np.abs(other)


def _leak(terms: ErrorTerms, scale: FloatArray, measured: FloatArray, reference: FloatArray) -> FloatArray:
    """Return the bound (N,) on |db| + |da| for errors of the raw waves of at most `measured` and `reference` (N,)."""
    db = scale * (measured + np.abs(terms.e00) * reference) / np.abs(terms.e10e01)
    return np.asarray(db * (1.0 + np.abs(terms.e11)) + scale * reference)


def _above(tones: Mapping[str, ComplexArray], wave: str, facts: BenchFacts) -> npt.NDArray[np.bool_]:
    return np.asarray(np.any([facts.linearity[wave].over_limit(x) for x in tones.values()], axis=0))


def _flagged(flags: tuple[tuple[str, ...], ...], found: Mapping[str, Linear]) -> tuple[tuple[str, ...], ...]:
    """Return the words of each point, with those that the linearity of its waves adds."""
    columns = [
        np.where(mask, f"{word}:{wave}", "")
        for wave, linear in found.items()
        for word, mask in (("above-linear-limit", linear.above), ("compression-not-undone", linear.beyond))
    ]
    return tuple(
        tuple(dict.fromkeys([*words, *(str(w) for w in more if w)]))
        for words, more in zip(flags, zip(*columns, strict=True), strict=True)
    )
