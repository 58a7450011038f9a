"""What must hold between the parts of a bench file, each mistake with its place."""

from __future__ import annotations

import difflib
from collections.abc import Iterator, Mapping

from benchrun.bench.connections import connection_problems, instrument_problems, listed
from benchrun.bench.instruments import OF_ONE_ROLE
from benchrun.bench.model import Bench, Bias
from benchrun.bench.names import DRIVE
from benchrun.errors import Problem
from benchrun.quantities import show
from benchrun.yaml_source import Source

#: Part of a drain's range below which it may count as off: what is left must harm nothing when the gate goes.
RELEASED_SHARE = 0.1


def bench_problems(bench: Bench, source: Source, roles: Mapping[str, str] | None = None) -> list[Problem]:
    """Return every mistake between the parts of a bench; `roles` are those of the installed drivers, where known."""
    checks = (
        _drivers(bench, source, roles),
        _instruments(bench, source),
        connection_problems(bench, source),
        _bias(bench, source),
        _full_names(bench, source),
        _simulated(bench, source),
    )
    return [problem for check in checks for problem in check]


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


def _bias(bench: Bench, source: Source) -> Iterator[Problem]:
    channels: dict[tuple[str, int], str] = {}
    for name, bias in bench.bias.items():
        yield from instrument_problems(bench, source, "bias", name, bias.instrument, ("dc-supply",))
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
    if bias.released_below is not None and bias.released_below > RELEASED_SHARE * largest:
        most = show(RELEASED_SHARE * largest, "voltage")
        message = (
            f"at {show(bias.released_below, 'voltage')} this bias is not off, and the gate would be released: it must "
            f"be {most} or less, a tenth of its range."
        )
        yield source.problem((*where, "released-below"), message)
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
