"""What the built-in drivers share: quantities that stand for dialect entries, and the front panel."""

from __future__ import annotations

from collections.abc import Mapping
from importlib import resources
from typing import ClassVar

from benchrun.contract.kinds import Readable, Settable
from benchrun.contract.roles import Call, Identity, InstrumentSettings, Link
from benchrun.errors import InstrumentError

#: FREQuency bit of STATus:QUEStionable (SCPI-1999 volume 1 section 9.3, from memory): not locked to the reference.
UNLOCKED = 1 << 5


def generic_dialect(name: str) -> str:
    """Return the text of the generic dialect beside this file."""
    return resources.files(__package__).joinpath(f"{name}.dialect.yaml").read_text(encoding="utf-8")


class OverLink:
    """An instrument whose quantities each stand for one dialect entry. Subclasses name quantities and entries."""

    SETTABLES: ClassVar[Mapping[str, Settable]] = {}
    READABLES: ClassVar[Mapping[str, Readable]] = {}

    def __init__(self, link: Link, settings: InstrumentSettings) -> None:
        self.link = link
        self.bench = settings
        self._stands: dict[str, object] = {}

    @property
    def settables(self) -> Mapping[str, Settable]:
        """Quantities that set() takes, by name."""
        return self.SETTABLES

    @property
    def readables(self) -> Mapping[str, Readable]:
        """Scalars that read() gives, by name."""
        return self.READABLES

    def identify(self) -> Identity:
        """Say who answers. Raises BenchError."""
        return self.link.identify()

    def set(self, quantity: str, value: float) -> float:
        """Set one quantity (SI, dBm) and return what stands. Raises BenchError."""
        self._known(quantity, self.settables)
        self._stands.pop(quantity, None)
        self._stands[quantity] = stands = float(self.link.confirm(quantity, **{quantity: value}))
        return stands

    def read(self, quantity: str) -> float:
        """Read one scalar (SI, dBm). Raises BenchError."""
        self._known(quantity, self.readables)
        return float(self.link.ask(quantity))

    def _see_untouched(self, found: Mapping[str, object]) -> None:
        """Raise InstrumentError where a setting is not what was read back when it was set: a hand was on it."""
        for entry, value in found.items():
            known = self._stands.get(entry, value)
            if known != value:
                self._stands.clear()
                raise InstrumentError(
                    f"{self.link.name}: its {entry} is now {value!r}; it was set to {known!r} and read back. "
                    "Somebody changed it at the front panel or over another link, or it was switched off and on. "
                    "Set the bench up again"
                )

    def _switch(self, on: bool, **values: float) -> None:
        """Switch an output, read back.

        Off is tried twice: an entry left in the error queue is no reason to leave it on.
        """
        try:
            self.link.confirm("output", on=on, **values)
        except InstrumentError:
            if on:
                raise
            self.link.confirm("output", on=on, **values)

    def _known(self, quantity: str, known: Mapping[str, object]) -> None:
        if quantity not in known:
            raise InstrumentError(
                f"{self.link.name} has no {quantity!r} to do this with; it has {', '.join(known) or 'none'}"
            )

    def _available(self, *calls: Call) -> list[Call]:
        """Return the calls whose entries the dialect has."""
        return [call for call in calls if self.link.has(call[0])]

    def _locked_to_reference(self) -> bool:
        return not int(self.link.ask("condition")) & UNLOCKED
