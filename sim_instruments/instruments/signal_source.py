"""Signal source: one CW output, or a list whose points advance on the bench's trigger line."""

from __future__ import annotations

from typing import ClassVar

from ..scpi_command import Command, setting
from ..scpi_errors import ScpiError
from ..scpi_instrument import Instrument
from ..scpi_values import Boolean, Choice, Number, NumberList

FREQUENCY_HZ = (100e3, 6.5e9)
LEVEL_DBM = (-110.0, 20.0)
SETTLE_NS = 2_000_000
LONGEST_LIST = 20001
FREQUENCY_BIT = 5  # of STATus:QUEStionable: the reference is not locked
WAITING_BIT = 5  # of STATus:OPERation: waiting for a trigger

_FREQUENCY = Number("HZ", *FREQUENCY_HZ, 1e9)
_LEVEL = Number("DBM", *LEVEL_DBM, 0.0)


class SignalSource(Instrument):
    """A generator. After *RST its output is off, at 1 GHz and 0 dBm: not the level that was set before."""

    MAKER = "Quillfen Works"
    MODEL = "Fell-6"
    FIRMWARE = "2.04"

    #: Whether the bench's reference reaches the input; a test may pull the plug.
    reference_present = True

    armed = False
    position = -1

    def after_reset(self) -> None:
        """Leave list mode and tell the world."""
        self._disarm()
        self._update()

    def changed(self, key: str, *suffixes: int) -> None:  # noqa: ARG002
        """Carry a setting to the world; a new list or mode ends the old one's run."""
        if key in {"frequency-mode", "list-frequency", "list-level"}:
            self._disarm()
        self._update()

    def settle(self) -> None:
        """Notice whether the reference is there."""
        super().settle()
        unlocked = self.value("reference") == "EXT" and not self.reference_present
        self.status.questionable.put(FREQUENCY_BIT, unlocked)

    # ---- list mode --------------------------------------------------------------------------------------------

    @property
    def in_list_mode(self) -> bool:
        """Whether frequency and level come from the list."""
        return bool(self.value("frequency-mode") == "LIST")

    def arm(self) -> None:
        """INITiate: wait at the first point for trigger pulses."""
        if not self.in_list_mode:
            raise ScpiError(-221, "FREQuency:MODE is not LIST")
        if self.armed:
            raise ScpiError(-213)
        self.points()
        self.armed, self.position = True, -1
        self.status.operation.put(WAITING_BIT, on=True)
        self._update()

    def abort(self) -> None:
        """ABORt: back to the list's first point, deaf to pulses."""
        self._disarm()
        self._update()

    def _disarm(self) -> None:
        self.armed, self.position = False, -1
        self.status.operation.put(WAITING_BIT, on=False)

    def points(self) -> list[tuple[float, float]]:
        """Return frequency and level of each list point; a single level serves all frequencies.

        Raises ScpiError -221 where the lists' lengths differ.
        """
        frequencies, levels = self.value("list-frequency"), self.value("list-level")
        if len(levels) not in {1, len(frequencies)}:
            raise ScpiError(-221, f"{len(frequencies)} list frequencies, {len(levels)} list levels")
        return list(zip(frequencies, levels * len(frequencies) if len(levels) == 1 else levels, strict=True))

    def follow(self, pulses: int) -> tuple[tuple[float, ...], tuple[float, ...]] | None:
        """Take trigger pulses: return frequency and level after each, or None where the source does not wait for them.

        Past the last point the list starts again while INITiate:CONTinuous is on; otherwise the source stays there.
        """
        if not (self.armed and self.value("trigger") == "TTLT1" and pulses):
            return None
        points, again = self.points(), self.value("continuous")
        steps = range(self.position + 1, self.position + 1 + pulses)
        indices = [step % len(points) if again else min(step, len(points) - 1) for step in steps]
        self.position = indices[-1]
        if not again and self.position == len(points) - 1:
            self.armed = False
            self.status.operation.put(WAITING_BIT, on=False)
        self._update()
        return tuple(points[i][0] for i in indices), tuple(points[i][1] for i in indices)

    # ---- the world --------------------------------------------------------------------------------------------

    def _update(self) -> None:
        frequency, level = self.value("frequency"), self.value("level")
        if self.in_list_mode:
            frequencies, levels = self.value("list-frequency"), self.value("list-level")
            index = max(self.position, 0)
            frequency, level = frequencies[min(index, len(frequencies) - 1)], levels[min(index, len(levels) - 1)]
        on = self.value("output")
        self.bench.world.set_source(self.name, frequency_hz=frequency, level_dbm=level, on=on)
        self.bench.disturb()

    COMMANDS: ClassVar[tuple[Command, ...]] = (
        setting("[SOURce:]FREQuency[:CW|FIXed]", "frequency", _FREQUENCY, 1e9, duration_ns=SETTLE_NS),
        setting("[SOURce:]FREQuency:MODE", "frequency-mode", Choice(("CW", "FIXed", "LIST")), "CW"),
        setting("[SOURce:]POWer[:LEVel][:IMMediate][:AMPLitude]", "level", _LEVEL, 0.0, duration_ns=SETTLE_NS),
        setting("[SOURce:]LIST:FREQuency", "list-frequency", NumberList(_FREQUENCY, LONGEST_LIST), (1e9,)),
        setting("[SOURce:]LIST:POWer", "list-level", NumberList(_LEVEL, LONGEST_LIST), (0.0,)),
        Command("[SOURce:]LIST:FREQuency:POINts", ask=lambda i: str(len(i.value("list-frequency")))),
        Command("[SOURce:]LIST:POWer:POINts", ask=lambda i: str(len(i.value("list-level")))),
        setting("[SOURce:]ROSCillator:SOURce", "reference", Choice(("INTernal", "EXTernal")), "INT"),
        setting("OUTPut[:STATe]", "output", Boolean(), False),
        setting("TRIGger[:SEQuence]:SOURce", "trigger", Choice(("IMMediate", "TTLTrg1")), "IMM"),
        setting("INITiate:CONTinuous", "continuous", Boolean(), False),
        Command("INITiate[:IMMediate]", arm),
        Command("ABORt", abort),
    )
