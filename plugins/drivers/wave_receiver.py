"""Generic wave receiver: an analyser whose receivers are read one wave at a time, at a grid and at offsets from it."""

from __future__ import annotations

from collections.abc import Mapping
from typing import ClassVar

import numpy as np

from benchrun.contract.capture import Capture, WaveData
from benchrun.contract.hooks import DriverSpec
from benchrun.contract.kinds import Settable
from benchrun.contract.roles import Call, InstrumentSettings, Link, Value
from benchrun.errors import IdentityError, InstrumentError

from .over_link import OverLink, generic_dialect

#: A deadline is this many times the sweep's modelled time, and this much more.
PATIENCE = 3.0
PATIENCE_S = 5.0
#: Settings that are read back with every sweep, as far as they were set: a hand at the front panel is noticed.
WATCHED = ("level", "frequency", "if-bandwidth", "averages")
#: Frequencies closer than this are the same point.
SAME_HZ = 1e-3


class GenericWaveReceiver(OverLink):
    """An analyser with receiver access and a source of its own, the probe."""

    SETTABLES: ClassVar[Mapping[str, Settable]] = {
        "frequency": Settable("frequency", "frequency", "the probe's frequency, and the grid's one point"),
        "level": Settable("level", "level", "the probe's level at the port"),
    }

    def __init__(self, link: Link, settings: InstrumentSettings) -> None:
        super().__init__(link, settings)
        self._capture: Capture | None = None
        self._sent: dict[str, Mapping[str, Value]] = {}

    def prepare(self) -> None:
        """RF off, sweeps one at a time, data as REAL,64, source port chosen, reference external, front panel locked."""
        self._forget()
        self.output(on=False)
        self.link.send("abort")
        self.link.confirm_all(self._available(
            ("free-run", {"on": False}),
            ("byte-order", {"order": "NORMal"}),
            ("averaging", {"on": True}),
            ("point-pulse", {"on": False}),
            ("reference", {"source": "EXTernal"}),
            ("panel-lock", {"on": True}),
            *self._source_port(),
        ))  # fmt: skip
        self._choose_format()
        self._check_capture()

    def _source_port(self) -> list[Call]:
        return [] if self.bench.source_port is None else [("source-port", {"port": self.bench.source_port})]

    def _choose_format(self) -> None:
        (stands,) = self.link.exchange([("data-format", {})], [("data-format", {})])
        if stands != ("REAL", "64"):
            raise InstrumentError(f"{self.link.name} sends data as {','.join(stands)}; REAL,64 was asked for")

    def _check_capture(self) -> None:
        """Compare how the instrument captures tones with what the bench file says."""
        found = self.link.ask("capture") == "COHerent"
        if found != self.bench.coherent:
            said, does = ("coherent", "retuned") if self.bench.coherent else ("retuned", "coherent")
            raise IdentityError(
                f"{self.link.name}: the bench file says `tones: {said}`, the instrument says {does}. "
                "Correct the bench file"
            )

    def set(self, quantity: str, value: float) -> float:
        """Set the probe's frequency (Hz) or level (dBm) and return what stands. Raises BenchError."""
        self._sent.pop(quantity, None)
        stands = super().set(quantity, value)
        self._sent[quantity] = {quantity: value}
        return stands

    def output(self, on: bool) -> None:
        """Switch the source's RF, read back. Raises BenchError."""
        self._switch(on)

    def locked(self) -> bool:
        """Whether the reference is locked. Raises BenchError."""
        return self._locked_to_reference()

    def configure(self, capture: Capture) -> None:
        """Set grid, tones, waves, IF bandwidth and averaging, those that do not stand already. Raises BenchError."""
        if capture == self._capture:
            return
        self._capture = None
        wanted = [*self._grid(capture), *self._receivers(capture)]
        changed = [(entry, values) for entry, values in wanted if self._sent.get(entry) != values]
        try:
            stands = self.link.confirm_all(changed)
        except BaseException:
            self._forget()
            raise
        self._sent.update(changed)
        self._stands.update(zip((entry for entry, _ in changed), stands, strict=True))
        self._capture = capture

    def _receivers(self, capture: Capture) -> list[Call]:
        missing = [wave for wave in capture.waves if wave not in self.bench.receivers]
        if missing:
            raise InstrumentError(
                f"{self.link.name} has no receiver for {', '.join(missing)}; "
                f"the bench file names {', '.join(self.bench.receivers) or 'none'}"
            )
        waves: list[Call] = []
        if capture.waves:
            waves = [("waves", {"receivers": tuple(self.bench.receivers[wave] for wave in capture.waves)})]
        return [
            *waves,
            ("offsets", {"offsets": capture.offsets_hz}),
            ("if-bandwidth", {"bandwidth": capture.if_bandwidth_hz}),
            ("averages", {"count": capture.averages}),
            *self._available(("point-pulse", {"on": capture.follow})),
        ]

    @staticmethod
    def _grid(capture: Capture) -> list[Call]:
        """Return the settings of the grid: one point, an even sweep, or a list."""
        grid = capture.frequencies_hz
        if len(grid) == 1:
            return [("grid-mode", {"mode": "CW"}), ("frequency", {"frequency": grid[0]})]
        if np.allclose(grid, np.linspace(grid[0], grid[-1], len(grid)), rtol=0.0, atol=SAME_HZ):
            return [
                ("grid-mode", {"mode": "SWEep"}),
                ("grid-start", {"frequency": grid[0]}),
                ("grid-stop", {"frequency": grid[-1]}),
                ("grid-points", {"points": len(grid)}),
            ]
        return [("grid-mode", {"mode": "LIST"}), ("grid-list", {"frequencies": grid})]

    def acquire(self) -> WaveData:
        """Make one sweep as configured and return the raw waves, root-watt, shape (tones, waves, points).

        Raises BenchError.
        """
        capture = self._capture
        if capture is None:
            raise InstrumentError(f"{self.link.name} was not configured before it was to acquire")
        if not capture.waves:
            return WaveData(np.empty(capture.shape, dtype=np.complex128), (), self.bench.coherent)
        try:
            return self._sweep(capture)
        except BaseException:
            self._forget()
            raise

    def _sweep(self, capture: Capture) -> WaveData:
        watched = tuple(entry for entry in WATCHED if entry in self._stands)
        asks: list[Call] = [(entry, {}) for entry in ("limits", *watched)]
        limits, *found = self.link.exchange([("sweep", {})], asks, deadline_s=self._deadline_s(capture))
        self._see_untouched(dict(zip(watched, found, strict=True)))
        if len(limits) != len(capture.waves):
            raise InstrumentError(f"{self.link.name} gave {len(limits)} limit flags for {len(capture.waves)} waves")
        tones, waves, points = capture.shape
        numbers = self.link.block("data", 2 * tones * waves * points)
        return WaveData(numbers.view(np.complex128).reshape(capture.shape), limits, self.bench.coherent)

    def _deadline_s(self, capture: Capture) -> float:
        tunings = 1 if self.bench.coherent else len(capture.tones)
        readings = len(capture.frequencies_hz) * capture.averages * tunings
        return PATIENCE * self.link.sweep_s(readings, capture.if_bandwidth_hz) + PATIENCE_S

    def _forget(self) -> None:
        """Believe nothing of what stands: the next configure() sets all of it."""
        self._capture = None
        self._sent.clear()
        self._stands.clear()

    def make_safe(self) -> None:
        """RF off, read back. Raises BenchError where that cannot be confirmed."""
        self._forget()
        self.output(on=False)


SPEC = DriverSpec(
    name="wave-receiver",
    role="wave-receiver",
    help="Analyser with receiver access: raw waves at a grid and at offsets from it; wants a dialect file.",
    dialect=generic_dialect("wave_receiver"),
    needs=(
        "frequency", "level", "output", "condition", "grid-mode", "grid-start", "grid-stop", "grid-points", "grid-list",
        "if-bandwidth", "averages", "sweep", "abort", "data-format", "source-port", "waves", "offsets", "capture",
        "data", "limits",
    ),
    optional=("free-run", "byte-order", "averaging", "point-pulse", "reference", "panel-lock"),
    following=("point-pulse",),
    build=GenericWaveReceiver,
)  # fmt: skip
