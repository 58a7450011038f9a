"""The safe state: everything off, read back, in the one order that neither people nor a depletion device pay for.

Sources off, read back; a receiver looks whether it still sees them; drain off, and read back below the bench's limit,
with patience; only then the gate. If anything before the gate is not confirmed the gate is never touched, and that is
said loudly. A link that fails is opened anew. Nothing that an instrument, a link or a driver does keeps the steps
behind it from being tried.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, field

from benchrun.acquire.descent import Descent, Kind, Step
from benchrun.acquire.opened import OpenBench
from benchrun.acquire.outputs import Outputs
from benchrun.contract.clock import Clock
from benchrun.contract.roles import SignalSource, WaveReceiver

#: How often a thing is tried at once, each time over a fresh link.
TRIES = 2
#: How long a drain may take to fall, and how often it is looked at.
PATIENCE_S = 10.0
LOOK_S = 0.1
CHECK = "Check it before you touch the bench"
BY_HAND = "By hand: RF off first, then the drain, the gate last"
#: Says what a receiver still sees, "" for nothing, None where it cannot tell.
Look = Callable[[], str | None]


@dataclass(frozen=True, slots=True)
class SafeReport:
    """What was confirmed and what was not, in words; `text` says all of it in one sentence.

    `reasons` are what went wrong on the way, also what a second try then mended.
    """

    confirmed: tuple[str, ...]
    unconfirmed: tuple[str, ...]
    text: str
    reasons: tuple[str, ...] = ()

    @property
    def safe(self) -> bool:
        """Whether everything is confirmed."""
        return not self.unconfirmed


def make_safe(bench: OpenBench, outputs: Outputs, clock: Clock, look: Look | None = None) -> SafeReport:
    """Bring everything down and say what was confirmed. Never raises for what the bench does; twice does no harm."""
    return _Bringing(bench, outputs, clock).down(look)


def lower(bench: OpenBench, outputs: Outputs, clock: Clock, look: Look | None = None) -> SafeReport:
    """Bring RF and drains down for a prompt, read back at this moment; gates stay as they are. Never raises."""
    return _Bringing(bench, outputs, clock).down(look, gates=False)


@dataclass(slots=True)
class _Bringing:
    """One way down."""

    bench: OpenBench
    outputs: Outputs
    clock: Clock
    reasons: list[str] = field(default_factory=list)
    drains_v: dict[str, float] = field(default_factory=dict)
    failed: set[str] = field(default_factory=set)
    witnessed: bool = False
    sources: dict[str, str] = field(init=False)

    def __post_init__(self) -> None:
        self.sources = _sources(self.bench, self.outputs)

    def down(self, look: Look | None, *, gates: bool = True) -> SafeReport:
        descent = Descent(self.sources, self.outputs.drains_below_v, self.outputs.gates if gates else ())
        while step := descent.next():
            if step.kind is Kind.WITNESS:
                confirmed = self._unseen(look)
            else:
                confirmed = self._tried(step, self.sources.get(step.name) or self._carrier(step.name))
            descent.report(step, confirmed=confirmed)
        return self._report(descent, gates=gates)

    def _tried(self, step: Step, instrument: str) -> bool:
        """Whether a step was done and read back; the link is opened anew between tries."""
        for attempt in range(TRIES):
            try:
                if attempt:
                    self._reopen(instrument)
                confirmed = self._done(step, instrument)
            except (Exception, KeyboardInterrupt) as error:  # whatever it is, the steps behind it must be tried
                self._because(_named(step.name, str(error) or type(error).__name__))
                self.failed.add(instrument)
            else:
                self.failed.discard(instrument)
                return confirmed
        return False

    def _done(self, step: Step, instrument: str) -> bool:
        if step.kind is Kind.SOURCE:
            self.bench.instruments[instrument].make_safe()
            return True
        self.bench.supply(step.name).output(step.name, False)
        return step.kind is Kind.GATE or self._released(step.name)

    def _released(self, drain: str) -> bool:
        """Whether a drain is read back below its limit before patience ends."""
        below_v = self.outputs.drains_below_v[drain]
        end_ns = self.clock.now_ns() + round(PATIENCE_S * 1e9)
        while True:
            volts = self.bench.read(f"{drain}.voltage")
            self.drains_v[drain] = volts
            if abs(volts) < below_v:
                return True
            if self.clock.now_ns() >= end_ns:
                self._because(
                    f"{drain}: off, and still at {volts:.1f} V after {PATIENCE_S:g} s (off is below {below_v:g} V)"
                )
                return False
            self.clock.sleep(LOOK_S)

    def _unseen(self, look: Look | None) -> bool:
        """Whether no receiver sees RF. One that cannot look is no witness and no obstacle: sources were read back."""
        receivers = {
            name: one for name, one in self.sources.items() if isinstance(self.bench.instruments[one], WaveReceiver)
        }
        if look is None or not self.failed.isdisjoint(receivers.values()):
            return True
        try:
            seen = look()
        except (Exception, KeyboardInterrupt):  # it may have restarted, with its own RF on: that is asked again
            return all(self._tried(Step(Kind.SOURCE, name), instrument) for name, instrument in receivers.items())
        self.witnessed = seen == ""
        if seen:
            self._because(seen)
        return not seen

    def _carrier(self, bias: str) -> str:
        supply = self.bench.supply(bias)
        return next((name for name, one in self.bench.instruments.items() if one is supply), "")

    def _reopen(self, instrument: str) -> None:
        session = self.bench.sessions.get(instrument)
        if session is not None:
            session.reopen()

    def _because(self, reason: str) -> None:
        if reason not in self.reasons:
            self.reasons.append(reason)

    def _report(self, descent: Descent, *, gates: bool) -> SafeReport:
        confirmed = tuple(
            self._words(step) for step in descent.confirmed if step.kind is not Kind.WITNESS or self.witnessed
        )
        unconfirmed = [step.name for step in descent.unconfirmed]
        if not unconfirmed:
            return SafeReport(confirmed, (), self._all_well(descent, gates=gates), tuple(self.reasons))
        return SafeReport(
            confirmed, tuple(unconfirmed), self._loud(confirmed, unconfirmed, descent), tuple(self.reasons)
        )

    def _words(self, step: Step) -> str:
        match step.kind:
            case Kind.DRAIN:
                return f"{step.name} below {self.outputs.drains_below_v[step.name]:g} V"
            case Kind.GATE:
                return f"{step.name} released"
            case Kind.SOURCE:
                return f"{step.name} off"
            case Kind.WITNESS:
                return "no RF seen by a receiver"

    def _all_well(self, descent: Descent, *, gates: bool) -> str:
        parts = ["sources off"]
        parts += [f"{drain} off ({volts:.1f} V read back)" for drain, volts in self.drains_v.items()]
        parts += [f"{step.name} released" for step in descent.confirmed if step.kind is Kind.GATE]
        return f"{', '.join(parts)}: confirmed" if gates else ", ".join(parts)

    def _loud(self, confirmed: tuple[str, ...], unconfirmed: list[str], descent: Descent) -> str:
        parts = [f"{words} confirmed" for words in confirmed]
        parts += [self._held(gate) for gate in descent.untouched]
        parts += [f"{name.upper()} NOT CONFIRMED" for name in unconfirmed]
        by_hand = f". {BY_HAND}" if descent.untouched else ""
        return f"Made safe: {', '.join(parts)}. {CHECK}{by_hand}"

    def _held(self, gate: str) -> str:
        """Say where a gate was left, as far as its supply says so."""
        try:
            return f"{gate} not touched (still at {self.bench.read(f'{gate}.voltage'):.1f} V)"
        except (Exception, KeyboardInterrupt):
            return f"{gate} not touched"


def _named(name: str, reason: str) -> str:
    """Return a reason that begins with what it is about; a message of a link of that name does already."""
    return reason if reason.startswith(f"{name} (") else f"{name}: {reason}"


def _sources(bench: OpenBench, outputs: Outputs) -> dict[str, str]:
    """Return everything that can radiate: the name by which an operator knows it, and its instrument."""
    named = {instrument: signal for signal, instrument in outputs.signals.items()}
    return {
        named.get(name, name): name
        for name, instrument in bench.instruments.items()
        if name in named or isinstance(instrument, SignalSource | WaveReceiver)
    }
