"""Wave receiver: an analyser with receiver access and a source of its own, which follows its grid.

The headers are those of DEVELOPERS.md. A sweep runs beside other messages until *OPC?, *WAI or the data are asked for.
"""

from __future__ import annotations

from typing import ClassVar

import numpy as np
import numpy.typing as npt

from ..scpi_command import Command, setting
from ..scpi_errors import ScpiError
from ..scpi_instrument import Instrument
from ..scpi_values import Boolean, Choice, DataFormat, Number, NumberList, WordList, numbers

FREQUENCY_HZ = (10e6, 8.5e9)
LEVEL_DBM = (-60.0, 10.0)
BANDWIDTH_HZ = (1.0, 1e6)
MOST_POINTS = 20001
MOST_TONES = 16
PORTS = 4
OWN_RECEIVERS = ("R1", "R2", "R3", "R4")
CHOSEN_GRID_HZ = (2e9, 3e9)
SETTLE_NS = 2_000_000
POINT_NS = 200_000
FILTER_TIMES = 1.2  # a point takes 1.2 / IF bandwidth
DEFAULT_POWER_UP_DBM = 0.0

SWEEPING_BIT = 3  # of STATus:OPERation
POWER_BIT, FREQUENCY_BIT = 3, 5  # of STATus:QUEStionable: over limit; reference unlocked

#: Settings that only say how data are sent.
_PRESENTATION = {"format", "byte-order", "continuous"}
#: Settings that take time and that the source feels.
_SOURCE = {"port", "level", "output", "mode", "cw", "start", "list"}

#: Waves of shape (tones, waves, points), and for each wave whether it was over its limit.
Sweep = tuple[npt.NDArray[np.complex128], tuple[bool, ...]]

_FREQUENCY = Number("HZ", *FREQUENCY_HZ, CHOSEN_GRID_HZ[0])


class WaveReceiver(Instrument):
    """Reads the waves of its receivers at each point of a grid and at each offset from it.

    Beware of *RST and of switching on: the port's power is ON then, at the power-up level.
    """

    MAKER = "Larkmoor Instruments"
    MODEL = "Tarn-4"
    FIRMWARE = "1.31"

    #: Whether the bench's reference reaches the input; a test may pull the plug.
    reference_present = True

    _data: Sweep | None = None
    _coming: Sweep | None = None

    def after_reset(self) -> None:
        """No data, continuous sweeps off, port power on: as a preset leaves it."""
        self._forget()
        self.byte_order = ">"
        self._update()

    def power_on(self) -> None:
        """As *RST, but sweeping continuously."""
        super().power_on()
        self.settings[("continuous",)] = True

    @property
    def options(self) -> str:
        """What *OPT? says of the capture."""
        return "COHERENT" if self.coherent else "0"

    @property
    def coherent(self) -> bool:
        """Whether all tones of a point are captured at one instant."""
        return bool(self.wiring.get("coherent", False))

    @property
    def receivers(self) -> tuple[str, ...]:
        """Names of the receivers: R1 to R4, and what else the wiring names. One that is not connected reads noise."""
        return tuple(dict.fromkeys((*OWN_RECEIVERS, *self.wiring.get("wired_receivers", ()))))

    @property
    def source_port(self) -> int:
        """Port that the preset's power comes out of."""
        return int(self.wiring.get("source_port") or 1)

    @property
    def power_up_dbm(self) -> float:
        """Level of the port after *RST."""
        level = self.wiring.get("power_up_dbm")
        return DEFAULT_POWER_UP_DBM if level is None else float(level)

    # ---- settings ---------------------------------------------------------------------------------------------

    def changed(self, key: str, *suffixes: int) -> None:  # noqa: ARG002
        """A setting of the sweep makes the data stale; one of the source goes to the world."""
        if key == "byte-order":
            self.byte_order = ">" if self.value(key) == "NORM" else "<"
        if key not in _PRESENTATION:
            self._forget()
        if key in _SOURCE:
            self._update()

    def settle(self) -> None:
        """Notice whether the reference is there."""
        super().settle()
        unlocked = self.value("reference") == "EXT" and not self.reference_present
        self.status.questionable.put(FREQUENCY_BIT, unlocked)

    def grid_hz(self) -> npt.NDArray[np.float64]:
        """Frequencies of the sweep."""
        mode = self.value("mode")
        if mode == "SWE":
            start, stop, points = (self.value(key) for key in ("start", "stop", "points"))
            return np.linspace(start, stop, int(points))
        return np.array(self.value("list") if mode == "LIST" else (self.value("cw"),), dtype=np.float64)

    def point_ns(self) -> int:
        """Time of one point: filter and overhead, for each average, and for each tone where receivers are retuned."""
        once = round(FILTER_TIMES * 1e9 / self.value("bandwidth")) + POINT_NS
        tones = 1 if self.coherent else len(self.value("offsets"))
        return int(once * tones * self._averages())

    def _averages(self) -> int:
        return int(self.value("averages")) if self.value("averaging") else 1

    # ---- sweeps -----------------------------------------------------------------------------------------------

    def initiate(self) -> None:
        """INITiate: start one sweep, which runs beside the next messages."""
        if self.busy_until_ns is not None or self.value("continuous"):
            raise ScpiError(-213)
        self._start()

    def abort(self) -> None:
        """ABORt: end a running sweep without data."""
        if self.busy_until_ns is not None:
            self._forget()

    def _start(self) -> None:
        grid = self._checked_grid()
        follow = self.bench.pulse(len(grid)) if self.value("pulses") else {}
        data, over = self.bench.world.measure_waves(
            self.name, list(self.value("waves")), grid, list(self.value("offsets")),
            self.value("bandwidth"), self._averages(), self.coherent, self.now_ns, follow or None,
        )  # fmt: skip
        self._forget()
        self._coming = (np.asarray(data, dtype=np.complex128), tuple(bool(flag) for flag in over))
        self.status.operation.put(SWEEPING_BIT, on=True)
        self.busy_for(self.point_ns() * len(grid))

    def _checked_grid(self) -> npt.NDArray[np.float64]:
        grid, offsets = self.grid_hz(), np.array(self.value("offsets"))
        tuned = (grid.min() + offsets.min(), grid.max() + offsets.max())
        if not FREQUENCY_HZ[0] <= tuned[0] <= tuned[1] <= FREQUENCY_HZ[1]:
            raise ScpiError(-221, f"receivers would be tuned to {tuned[0]:g} to {tuned[1]:g} Hz")
        return grid

    def finished(self) -> None:
        """The sweep has ended: its data stand."""
        self._data, self._coming = self._coming, None
        self.status.operation.put(SWEEPING_BIT, on=False)
        self.status.questionable.put(POWER_BIT, any(self._data[1]) if self._data else False)

    def _forget(self) -> None:
        self._data = self._coming = None
        self.busy_until_ns = None
        self.status.operation.put(SWEEPING_BIT, on=False)
        self.status.questionable.put(POWER_BIT, on=False)

    def _last_sweep(self) -> Sweep:
        """Return the last sweep's data, after the running one; a fresh sweep's where they are made continuously."""
        if self.value("continuous") and self.busy_until_ns is None:
            self._start()
        self.wait()
        if self._data is None:
            raise ScpiError(-230, "no sweep since the last setting")
        return self._data

    # ---- answers ----------------------------------------------------------------------------------------------

    def data(self) -> bytes:
        """Tone, wave, point, then real and imaginary part, in the chosen format."""
        kind, bits = self.value("format")
        flat = np.ascontiguousarray(self._last_sweep()[0]).view(np.float64).ravel()
        return numbers(flat, kind, bits, "<" if self.byte_order == "<" else ">")

    def limits(self) -> str:
        """0 or 1 for each wave: its receiver was over the linear limit in the last sweep."""
        return ",".join("1" if over else "0" for over in self._last_sweep()[1])

    def _update(self) -> None:
        """Tell the world of the source: between sweeps it stands at the grid's first point."""
        on = self.value("output") and int(self.value("port")) == self.source_port
        self.bench.world.set_source(
            self.name, frequency_hz=float(self.grid_hz()[0]), level_dbm=self.value("level"), on=bool(on)
        )
        self.bench.disturb()

    COMMANDS: ClassVar[tuple[Command, ...]] = (
        setting("[SENSe:]FREQuency:MODE", "mode", Choice(("CW", "SWEep", "LIST")), "SWE"),
        setting("[SENSe:]FREQuency[:CW|FIXed]", "cw", _FREQUENCY, CHOSEN_GRID_HZ[0], duration_ns=SETTLE_NS),
        setting("[SENSe:]FREQuency:STARt", "start", _FREQUENCY, CHOSEN_GRID_HZ[0]),
        setting("[SENSe:]FREQuency:STOP", "stop", _FREQUENCY, CHOSEN_GRID_HZ[1]),
        setting("[SENSe:]SWEep:POINts", "points", Number("", 1, MOST_POINTS, 201, integer=True), 201),
        setting("[SENSe:]LIST:FREQuency", "list", NumberList(_FREQUENCY, MOST_POINTS), CHOSEN_GRID_HZ),
        Command("[SENSe:]LIST:FREQuency:POINts", ask=lambda i: str(len(i.value("list")))),
        setting("[SENSe:]BANDwidth|BWIDth[:RESolution]", "bandwidth", Number("HZ", *BANDWIDTH_HZ, 1e4), 1e4),
        setting("[SENSe:]AVERage[:STATe]", "averaging", Boolean(), True),
        setting("[SENSe:]AVERage:COUNt", "averages", Number("", 1, 65536, 1, integer=True), 1),
        setting("[SENSe:]RECeiver:LIST", "waves", WordList(lambda i: i.receivers), OWN_RECEIVERS[:1]),
        setting(
            "[SENSe:]RECeiver:OFFSet", "offsets", NumberList(Number("HZ", -1e9, 1e9, 0.0), MOST_TONES), (0.0,)
        ),
        Command("[SENSe:]RECeiver:CAPTure", ask=lambda i: "COH" if i.coherent else "STEP"),
        Command("[SENSe:]RECeiver:DATA", ask=data),
        Command("[SENSe:]RECeiver:LIMit", ask=limits),
        setting("[SENSe:]ROSCillator:SOURce", "reference", Choice(("INTernal", "EXTernal")), "INT"),
        setting(
            "SOURce:PORT", "port", Number("", 1, PORTS, lambda i: i.source_port, integer=True), lambda i: i.source_port
        ),
        setting(
            "SOURce:POWer[:LEVel][:IMMediate][:AMPLitude]", "level",
            Number("DBM", *LEVEL_DBM, lambda i: i.power_up_dbm), lambda i: i.power_up_dbm, duration_ns=SETTLE_NS,
        ),
        setting("OUTPut[:STATe]", "output", Boolean(), True),
        setting("OUTPut:TTLTrg[:STATe]", "pulses", Boolean(), False),
        Command("INITiate[:IMMediate]", initiate),
        setting("INITiate:CONTinuous", "continuous", Boolean(), False),
        Command("ABORt", abort),
        setting("FORMat[:DATA]", "format", DataFormat(), ("ASC", 0)),
        setting("FORMat:BORDer", "byte-order", Choice(("NORMal", "SWAPped")), "NORM"),
    )  # fmt: skip
