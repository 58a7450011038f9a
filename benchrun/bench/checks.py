"""What must hold between the parts of a bench file, each mistake with its place."""

from __future__ import annotations

import difflib
from collections.abc import Iterable, Iterator, Mapping

from benchrun.bench.instruments import OF_ONE_ROLE
from benchrun.bench.model import Bench, Bias
from benchrun.bench.names import DRIVE
from benchrun.bench.parts import Coupler
from benchrun.errors import Problem
from benchrun.quantities import show
from benchrun.yaml_source import Source

SOURCES = ("signal-source", "wave-receiver")


def bench_problems(bench: Bench, source: Source, roles: Mapping[str, str] | None = None) -> list[Problem]:
    """Return every mistake between the parts of a bench; `roles` are those of the installed drivers, where known."""
    checks = (
        _drivers(bench, source, roles),
        _instruments(bench, source),
        _paths(bench, source),
        _signals(bench, source),
        _receivers(bench, source),
        _bias(bench, source),
        _full_names(bench, source),
        _simulated(bench, source),
    )
    return [problem for check in checks for problem in check]


def listed(names: Iterable[str]) -> str:
    """Return names for a message: 'a, b, c', or 'nothing'."""
    return ", ".join(names) or "nothing"


def not_there(what: str, name: str, there: Iterable[str]) -> str:
    """Return the message for a name that nothing has, with the nearest that something has."""
    known = list(there)
    near = difflib.get_close_matches(name, known, n=1)
    hint = f"Did you mean '{near[0]}'?" if near else f"It has {listed(known)}."
    return f"the bench has no {what} called '{name}'. {hint}"


def _drivers(bench: Bench, source: Source, roles: Mapping[str, str] | None) -> Iterator[Problem]:
    for name, instrument in bench.instruments.items():
        where = ("instruments", name, "driver")
        if roles is not None and instrument.driver not in roles:
            near = difflib.get_close_matches(instrument.driver, roles, n=1)
            hint = f" Did you mean '{near[0]}'?" if near else ""
            yield source.problem(
                where,
                f"no installed driver is called '{instrument.driver}'.{hint} Installed: {listed(roles)}.",
            )


def _instruments(bench: Bench, source: Source) -> Iterator[Problem]:
    for name, instrument in bench.instruments.items():
        role = bench.role(name)
        for key, only in OF_ONE_ROLE.items():
            if getattr(instrument, key.replace("-", "_")) is not None and role not in (only, ""):
                message = f"'{key}' belongs to a {only}; '{name}' is a {role}."
                yield source.problem(("instruments", name, key), message, at_key=True)
        if role == "power-meter" and instrument.sensor is None:
            yield source.problem(
                ("instruments", name), f"'{name}' needs 'sensor': what its sensor bears and reflects.", at_key=True
            )
        path = bench.dialect_path(name)
        if path is not None and not path.is_file():
            message = f"there is no file '{instrument.dialect}'; names are taken from the folder of this file."
            yield source.problem(("instruments", name, "dialect"), message)


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
        yield from _instrument_of(bench, source, "signals", name, signal.instrument, SOURCES)
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
    if instrument is None:
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
        yield from _instrument_of(bench, source, "receivers", name, receiver.instrument, ("wave-receiver",))
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
        if bench.instruments[instrument].receiver is None:
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


def _instrument_of(
    bench: Bench, source: Source, room: str, name: str, instrument: str, roles: tuple[str, ...]
) -> Iterator[Problem]:
    """The instrument exists and has one of the roles (where its role is known)."""
    where = (room, name, "instrument")
    if instrument not in bench.instruments:
        yield source.problem(where, not_there("instrument", instrument, bench.instruments))
    elif bench.role(instrument) not in ("", *roles):
        message = f"'{instrument}' is a {bench.role(instrument)}; {room} come from a {' or a '.join(roles)}."
        yield source.problem(where, message)


def _bias(bench: Bench, source: Source) -> Iterator[Problem]:
    channels: dict[tuple[str, int], str] = {}
    for name, bias in bench.bias.items():
        yield from _instrument_of(bench, source, "bias", name, bias.instrument, ("dc-supply",))
        seen = channels.setdefault((bias.instrument, bias.channel), name)
        if seen != name:
            yield source.problem(
                ("bias", name, "channel"), f"channel {bias.channel} of '{bias.instrument}' is '{seen}' already."
            )
        yield from _one_bias(name, bias, source)


def _one_bias(name: str, bias: Bias, source: Source) -> Iterator[Problem]:
    where = ("bias", name)
    largest = max(map(abs, bias.voltage))
    if bias.over_voltage < largest:
        message = f"the over-voltage trip would trip inside the range: it must be {show(largest, 'voltage')} or more."
        yield source.problem((*where, "over-voltage"), message)
    if bias.pinch_off is not None and not bias.voltage[0] <= bias.pinch_off <= bias.voltage[1]:
        yield source.problem((*where, "pinch-off"), "pinch-off lies outside the voltage range of this bias.")
    for bias_name, key in (("gate", "pinch_off"), ("drain", "released_below")):
        if name == bias_name and getattr(bias, key) is None:
            message = f"'{name}' needs '{key.replace('_', '-')}': the safe state depends on it."
            yield source.problem(where, message, at_key=True)


def _full_names(bench: Bench, source: Source) -> Iterator[Problem]:
    """No two things share a full name: signals, biases and the instruments that have quantities of their own."""
    owners: dict[str, str] = {}
    own = [name for name in bench.instruments if bench.role(name) in ("power-meter", "thermometer")]
    for room, names in (("signals", bench.signals), ("bias", bench.bias), ("instruments", own)):
        for name in names:
            if name == DRIVE:
                yield source.problem(
                    (room, name), f"'{DRIVE}' is the power at the device's input; choose another name.", at_key=True
                )
            if name in owners:
                yield source.problem(
                    (room, name), f"'{name}' is a name in {owners[name]} already; choose another.", at_key=True
                )
            owners.setdefault(name, room)


def _simulated(bench: Bench, source: Source) -> Iterator[Problem]:
    if bench.rehearsal_channel and not bench.simulated:
        yield source.problem(
            ("rehearsal-channel",), "only a bench with `simulated: true` has a rehearsal channel.", at_key=True
        )
