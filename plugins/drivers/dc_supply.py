"""Generic dc supply with named outputs: voltages, current limits, trips, and what flows.

CAUTION: a depletion device dies when its gate is released under drain. The order of outputs is kept by the safe state;
this driver switches one output at a time, and as a whole only the last-named bias first.
"""

from __future__ import annotations

from collections.abc import Mapping

from benchrun.contract.hooks import DriverSpec
from benchrun.contract.kinds import Readable, Settable
from benchrun.contract.roles import InstrumentSettings, Link
from benchrun.errors import InstrumentError

from .over_link import OverLink, generic_dialect

#: An output that is off counts as released below this magnitude.
RELEASED_V = 1.0
#: How often and how long a released output is looked at.
LOOK_S = 0.1
LOOKS = 50
_ENTRIES = {"voltage": "voltage", "current-limit": "current"}
_MEASURED = {"voltage": "measured-voltage", "current": "measured-current"}


class GenericDcSupply(OverLink):
    """A supply that speaks SCPI-1999, its outputs numbered as header suffixes."""

    def __init__(self, link: Link, settings: InstrumentSettings) -> None:
        super().__init__(link, settings)
        self._settables = {
            name: one
            for bias in settings.channels
            for name, one in (
                (f"{bias}.voltage", Settable(f"{bias}.voltage", "voltage", f"voltage of {bias}")),
                (f"{bias}.current-limit", Settable(f"{bias}.current-limit", "current", f"current limit of {bias}")),
            )
        }
        self._readables = {
            name: one
            for bias in settings.channels
            for name, one in (
                (f"{bias}.voltage", Readable(f"{bias}.voltage", "voltage", f"voltage at the terminals of {bias}")),
                (f"{bias}.current", Readable(f"{bias}.current", "current", f"current out of {bias}")),
            )
        }

    @property
    def settables(self) -> Mapping[str, Settable]:
        """Voltage and current limit of each bias."""
        return self._settables

    @property
    def readables(self) -> Mapping[str, Readable]:
        """Voltage and current of each bias, measured."""
        return self._readables

    def prepare(self) -> None:
        """Lock the front panel and see that every output answers; none is switched: their order is the bench's."""
        self.link.confirm_all(self._available(("panel-lock", {"on": True})))
        for bias in self.bench.channels:
            self.link.ask("output", channel=self._channel(bias))

    def set(self, quantity: str, value: float) -> float:
        """Set "<bias>.voltage" (V) or "<bias>.current-limit" (A) and return what stands. Raises BenchError."""
        self._known(quantity, self.settables)
        bias, _, which = quantity.rpartition(".")
        return float(self.link.confirm(which, channel=self._channel(bias), **{_ENTRIES[which]: value}))

    def read(self, quantity: str) -> float:
        """Measure "<bias>.voltage" (V) or "<bias>.current" (A). Raises BenchError."""
        self._known(quantity, self.readables)
        bias, _, which = quantity.rpartition(".")
        return float(self.link.ask(_MEASURED[which], channel=self._channel(bias)))

    def program_trips(self, bias: str, *, current_limit_a: float, over_voltage_v: float, over_current: bool) -> None:
        """Program current limit, over-voltage and over-current trip of one output, all read back. Raises BenchError."""
        channel = self._channel(bias)
        self.link.confirm_all([
            ("current-limit", {"channel": channel, "current": current_limit_a}),
            ("over-voltage", {"channel": channel, "voltage": over_voltage_v}),
            ("over-current", {"channel": channel, "on": over_current}),
        ])  # fmt: skip

    def output(self, bias: str, on: bool) -> None:
        """Switch one output, read back. Raises BenchError."""
        self._switch(on, channel=self._channel(bias))

    def tripped(self, bias: str) -> bool:
        """Whether a protection of this output has tripped. Raises BenchError."""
        values = {"channel": self._channel(bias)}
        return any(self.link.exchange([], [("voltage-tripped", values), ("current-tripped", values)]))

    def make_safe(self) -> None:
        """Outputs off, the last-named bias first, each seen released before the next.

        Raises BenchError where one is not.
        """
        for bias in reversed(list(self.bench.channels)):
            self.output(bias, on=False)
            self._see_released(bias)

    def _see_released(self, bias: str) -> None:
        for _ in range(LOOKS):
            volts = self.read(f"{bias}.voltage")
            if abs(volts) < RELEASED_V:
                return
            self.link.clock.sleep(LOOK_S)
        raise InstrumentError(
            f"{self.link.name}: {bias} is off and still at {volts:.2f} V; the outputs before it were not touched"
        )

    def _channel(self, bias: str) -> int:
        try:
            return self.bench.channels[bias]
        except KeyError:
            raise InstrumentError(
                f"{self.link.name} has no output {bias!r}; it has {', '.join(self.bench.channels)}"
            ) from None


SPEC = DriverSpec(
    name="dc-supply",
    role="dc-supply",
    help="DC supply by SCPI-1999: voltages, current limits, trips, measured voltage and current.",
    dialect=generic_dialect("dc_supply"),
    needs=(
        "voltage", "current-limit", "over-voltage", "over-current", "voltage-tripped", "current-tripped", "output",
        "measured-voltage", "measured-current",
    ),
    optional=("panel-lock",),
    build=GenericDcSupply,
)  # fmt: skip
