"""How instruments, parts and planes are connected: every mistake with its place."""

from __future__ import annotations

import difflib
from collections.abc import Iterable, Iterator

from benchrun.bench.model import Bench
from benchrun.bench.parts import Coupler
from benchrun.errors import Problem
from benchrun.yaml_source import Source

_MANY = {"signals": "signals", "receivers": "receivers", "bias": "bias voltages"}
SOURCES = ("signal-source", "wave-receiver")


def connection_problems(bench: Bench, source: Source) -> Iterator[Problem]:
    """Yield every mistake in how things are connected."""
    yield from _paths(bench, source)
    yield from _signals(bench, source)
    yield from _receivers(bench, source)


def listed(names: Iterable[str]) -> str:
    """Return names for a message: 'a, b, c', or 'nothing'."""
    return ", ".join(names) or "nothing"


def not_there(what: str, name: str, there: Iterable[str]) -> str:
    """Return the message for a name that nothing has, with the nearest that something has."""
    known = list(there)
    near = difflib.get_close_matches(name, known, n=1)
    hint = f"Did you mean '{near[0]}'?" if near else f"It has {listed(known)}."
    return f"the bench has no {what} called '{name}'. {hint}"


def _paths(bench: Bench, source: Source) -> Iterator[Problem]:
    """Every part on a way exists, and stands in one place only."""
    standing: dict[str, str] = {}
    for room, ways in (("signals", bench.signals), ("receivers", bench.receivers)):
        for name, way in ways.items():
            for index, part in enumerate(way.path):
                where = (room, name, "path", index)
                if part not in bench.parts:
                    yield source.problem(where, not_there("part", part, bench.parts))
                elif part in standing:
                    yield source.problem(
                        where, f"'{part}' stands on the way of '{standing[part]}' already; one part is in one place."
                    )
                else:
                    standing[part] = name


def _signals(bench: Bench, source: Source) -> Iterator[Problem]:
    planes: dict[str, str] = {}
    sources: dict[str, str] = {}
    for name, signal in bench.signals.items():
        yield from instrument_problems(bench, source, "signals", name, signal.instrument, SOURCES)
        if signal.plane in planes:
            message = f"'{planes[signal.plane]}' goes to the {signal.plane} plane already; one signal to one plane."
            yield source.problem(("signals", name, "plane"), message)
        if signal.instrument in sources:
            message = (
                f"'{signal.instrument}' gives '{sources[signal.instrument]}' already; one signal from one instrument."
            )
            yield source.problem(("signals", name, "instrument"), message)
        planes.setdefault(signal.plane, name)
        sources.setdefault(signal.instrument, name)
    for instrument in sources:
        yield from _of_a_source(bench, source, instrument)


def _of_a_source(bench: Bench, source: Source, name: str) -> Iterator[Problem]:
    """A source has a ceiling; an analyser's source has a port."""
    instrument = bench.instruments.get(name)
    if instrument is None or bench.role(name) not in ("", *SOURCES):
        return
    if instrument.ceiling is None:
        message = f"'{name}' needs 'ceiling': the highest level that is ever sent to it. Without one no level is sent."
        yield source.problem(("instruments", name), message, at_key=True)
    if bench.role(name) == "wave-receiver" and instrument.source_port is None:
        message = (
            f"'{name}' gives a signal and needs 'source-port': its number, what it bears, and its level at power-up."
        )
        yield source.problem(("instruments", name), message, at_key=True)


def _receivers(bench: Bench, source: Source) -> Iterator[Problem]:
    taken: dict[tuple[str, str], str] = {}
    arms: dict[tuple[str, str], str] = {}
    passed = {part for signal in bench.signals.values() for part in signal.path}
    for name, receiver in bench.receivers.items():
        yield from instrument_problems(bench, source, "receivers", name, receiver.instrument, ("wave-receiver",))
        yield from _coupler_of(bench, source, name, passed)
        where = ("receivers", name)
        for key, value, seen in (
            (
                "receiver",
                f"{receiver.instrument} {receiver.receiver}",
                taken.setdefault((receiver.instrument, receiver.receiver), name),
            ),
            (
                "arm",
                f"the {receiver.arm} arm of {receiver.coupler}",
                arms.setdefault((receiver.coupler, receiver.arm), name),
            ),
        ):
            if seen != name:
                yield source.problem((*where, key), f"{value} is '{seen}' already.")
    for instrument in {receiver.instrument for receiver in bench.receivers.values()} & set(bench.instruments):
        if bench.role(instrument) in ("", "wave-receiver") and bench.instruments[instrument].receiver is None:
            message = (
                f"'{instrument}' needs 'receiver': what its receiver inputs bear and up to what level they are linear."
            )
            yield source.problem(("instruments", instrument), message, at_key=True)


def _coupler_of(bench: Bench, source: Source, name: str, passed: set[str]) -> Iterator[Problem]:
    coupler, where = bench.receivers[name].coupler, ("receivers", name, "coupler")
    part = bench.parts.get(coupler)
    couplers = [part_name for part_name, one in bench.parts.items() if isinstance(one, Coupler)]
    if part is None:
        yield source.problem(where, not_there("coupler", coupler, couplers))
    elif not isinstance(part, Coupler):
        yield source.problem(where, f"'{coupler}' is a {part.kind}, not a coupler. The bench has {listed(couplers)}.")
    elif coupler not in passed:
        yield source.problem(
            where, f"no signal passes '{coupler}': put it on the path of the signal that it stands in."
        )


def instrument_problems(
    bench: Bench, source: Source, room: str, name: str, instrument: str, roles: tuple[str, ...]
) -> Iterator[Problem]:
    """The instrument exists and has one of the roles (where its role is known)."""
    where = (room, name, "instrument")
    if instrument not in bench.instruments:
        yield source.problem(where, not_there("instrument", instrument, bench.instruments))
    elif bench.role(instrument) not in ("", *roles):
        message = f"'{instrument}' is a {bench.role(instrument)}; {_MANY[room]} come from a {' or a '.join(roles)}."
        yield source.problem(where, message)
