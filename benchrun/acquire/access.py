"""What a step's procedure may do to the bench (contract.hooks.BenchAccess). RF is off while it works."""

from __future__ import annotations

from collections.abc import Callable, Mapping

from benchrun.acquire.opened import OpenBench
from benchrun.acquire.outputs import Outputs
from benchrun.acquire.stop import StopRequest
from benchrun.contract.clock import Clock
from benchrun.contract.roles import DcSupply
from benchrun.errors import InstrumentError


class Access:
    """One procedure's way to the bench. A stop that was asked for ends it between two exchanges."""

    def __init__(
        self, bench: OpenBench, outputs: Outputs, clock: Clock, stop: StopRequest, say: Callable[[str], None]
    ) -> None:
        self.used_bias = False
        self._bench = bench
        self._outputs = outputs
        self._clock = clock
        self._stop = stop
        self._say = say

    @property
    def clock(self) -> Clock:
        """Clock to wait on."""
        return self._clock

    def set(self, target: str, value: float) -> float:
        """Set a settable by full name; returns what stands. Raises BenchError."""
        self._stop_here()
        return self._bench.set(target, value)

    def read(self, target: str) -> float:
        """Read a scalar by full name. Raises BenchError."""
        self._stop_here()
        return self._bench.read(target)

    def supply(self, bias: str) -> DcSupply:
        """Return the supply that carries this bias."""
        self._stop_here()
        self.used_bias = True
        return self._bench.supply(bias)

    def bias_limits(self, bias: str) -> Mapping[str, float]:
        """Return the bench file's limits of this bias. Raises InstrumentError where there is none of this name."""
        try:
            return self._outputs.bias_limits[bias]
        except KeyError:
            there = ", ".join(self._outputs.bias_limits) or "none"
            raise InstrumentError(f"the bench has no bias {bias!r}; it has {there}. Add it to the bench file") from None

    def say(self, text: str) -> None:
        """Tell the operator and the archive what was done."""
        self._say(text)

    def _stop_here(self) -> None:
        if self._stop.requested:
            raise KeyboardInterrupt
