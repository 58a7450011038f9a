"""Generic signal source: frequency, level, RF on and off, and a list that follows trigger pulses."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import ClassVar

from benchrun.contract.hooks import DriverSpec
from benchrun.contract.kinds import Settable
from benchrun.errors import InstrumentError

from .over_link import OverLink, generic_dialect

LIST_ENTRIES = ("list-frequencies", "list-levels", "frequency-mode", "trigger", "arm", "rearm")


class GenericSignalSource(OverLink):
    """A generator that speaks SCPI-1999."""

    SETTABLES: ClassVar[Mapping[str, Settable]] = {
        "frequency": Settable("frequency", "frequency", "carrier frequency"),
        "level": Settable("level", "level", "level at the output connector"),
    }

    def prepare(self) -> None:
        """RF off, fixed frequency, external reference, front panel locked; frequency and level stay as they are."""
        self._stands.clear()
        self.output(on=False)
        self.leave_list()
        self.link.confirm_all(self._available(("reference", {"source": "EXTernal"}), ("panel-lock", {"on": True})))

    def output(self, on: bool) -> None:
        """Switch RF, read back; before it comes on, see that nobody changed frequency or level. Raises BenchError."""
        if on and self._stands:
            entries = tuple(self._stands)
            found = self.link.exchange([], [(entry, {}) for entry in entries])
            self._see_untouched(dict(zip(entries, found, strict=True)))
        self._switch(on)

    def locked(self) -> bool:
        """Whether the reference is locked. Raises BenchError."""
        return self._locked_to_reference()

    def load_list(self, frequencies_hz: Sequence[float], levels_dbm: Sequence[float]) -> None:
        """Load points and wait at the first for trigger pulses; the list starts again after the last.

        Raises InstrumentError where the dialect has no list, where lengths differ, or where a level is not allowed.
        """
        absent = [entry for entry in LIST_ENTRIES if not self.link.has(entry)]
        if absent:
            raise InstrumentError(
                f"{self.link.name} has no list: its dialect lacks {', '.join(absent)}. Step it point by point"
            )
        if not frequencies_hz or len(frequencies_hz) != len(levels_dbm):
            raise InstrumentError(
                f"{self.link.name}: {len(frequencies_hz)} frequencies and {len(levels_dbm)} levels make no list"
            )
        self.leave_list()
        self._stands.clear()
        self.link.confirm("level", level=levels_dbm[0])
        self.link.confirm_all([
            ("list-frequencies", {"frequencies": list(frequencies_hz)}),
            ("list-levels", {"levels": list(levels_dbm)}),
        ])  # fmt: skip
        self._list_mode("LIST")
        self.link.confirm_all([("trigger", {"source": "TTLTrg1"}), ("rearm", {"on": True})])
        self.link.send("arm")

    def leave_list(self) -> None:
        """Go back to fixed frequency. Raises BenchError."""
        if not self.link.has("frequency-mode"):
            return
        if self.link.has("abort"):
            self.link.send("abort")
        self.link.confirm_all(self._available(("rearm", {"on": False})))
        self._list_mode("CW")

    def _list_mode(self, mode: str) -> None:
        level_mode = "LIST" if mode == "LIST" else "FIXed"
        self.link.confirm_all(self._available(("frequency-mode", {"mode": mode}), ("level-mode", {"mode": level_mode})))

    def make_safe(self) -> None:
        """RF off, read back. Raises BenchError where that cannot be confirmed."""
        self.output(on=False)


SPEC = DriverSpec(
    name="signal-source",
    role="signal-source",
    help="Signal generator by SCPI-1999: frequency, level, RF on and off; lists on a trigger line.",
    dialect=generic_dialect("signal_source"),
    needs=("frequency", "level", "output", "condition"),
    optional=(*LIST_ENTRIES, "level-mode", "abort", "reference", "panel-lock"),
    following=LIST_ENTRIES,
    build=GenericSignalSource,
)
