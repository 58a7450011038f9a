"""What every driver keeps (benchrun/contract/roles.py), checked on each against each of its opponents."""

from __future__ import annotations

import math
import re
from typing import Any

import pytest

from benchrun.contract import roles
from benchrun.contract.capture import Capture
from benchrun.contract.kinds import UNIT_SUFFIX
from benchrun.errors import BenchError, InstrumentError, LinkError
from tests.contract.opponents import OPPONENTS, REGISTRY, Bout, Opponent

ROLE_OF = {
    "wave-receiver": roles.WaveReceiver,
    "signal-source": roles.SignalSource,
    "power-meter": roles.PowerMeter,
    "dc-supply": roles.DcSupply,
    "thermometer": roles.Thermometer,
}
#: Values that any bench instrument of this kind can take, and one that none can.
FITTING = {"frequency": (2.2e9, 2.3e9), "level": (-30.0, -20.0), "voltage": (0.0, -0.5), "current": (0.02, 0.05)}
BEYOND = {"frequency": 1e15, "voltage": 1e6, "current": 1e6}
#: Presets and resets: never said, a preset may switch port power on.
FORBIDDEN = re.compile(r"\*RST|PRES|\*RCL|\*TST", re.IGNORECASE)
HOT = Capture(("incident", "reflected"), ("probe", "pump"), (0.0, -7e6), (2.3e9,), 1000.0)
FAULTS = (
    "no-answer",
    "lost-answer",
    "late-answer",
    "garbage",
    "half-block",
    "connection-reset",
    "reset-after",
    "error-entry",
    "power-cycle",
)


def fitting(bout: Bout, quantity: str) -> tuple[float, ...]:
    values = FITTING[bout.driver.settables[quantity].kind]
    return tuple(abs(value) for value in values) if quantity.startswith("drain") else values


def switch(bout: Bout, on: bool) -> None:
    """Switch whatever the instrument can switch, a supply's gate before its drain."""
    if bout.spec.role == "dc-supply":
        for bias in bout.driver.bench.channels if on else reversed(bout.driver.bench.channels):
            bout.driver.output(bias, on=on)
    elif hasattr(bout.driver, "output"):
        bout.driver.output(on=on)


def is_on(bout: Bout) -> bool:
    """Whether anything is on, asked past the driver."""
    if bout.spec.role == "dc-supply":
        return any(bout.session.ask("output", channel=n) for n in bout.driver.bench.channels.values())
    return bool(bout.session.ask("output")) if hasattr(bout.driver, "output") else False


def exercise(bout: Bout) -> None:
    """Use the driver as a run does."""
    driver = bout.driver
    driver.identify()
    driver.prepare()
    for quantity in driver.settables:
        driver.set(quantity, fitting(bout, quantity)[0])
    switch(bout, on=True)
    for quantity in driver.readables:
        driver.read(quantity)
    if isinstance(driver, roles.WaveReceiver) and bout.spec.role == "wave-receiver":
        driver.configure(HOT)
        driver.acquire()
    switch(bout, on=False)


def test_every_installed_driver_is_put_through(request: pytest.FixtureRequest) -> None:
    assert {one.driver for one in OPPONENTS} >= set(REGISTRY.drivers)


def test_it_plays_its_role(bout: Bout) -> None:
    assert isinstance(bout.driver, roles.Instrument)
    assert isinstance(bout.driver, ROLE_OF[bout.spec.role])
    assert isinstance(bout.session, object)
    for quantities in (bout.driver.settables, bout.driver.readables):
        for name, one in quantities.items():
            assert one.name == name
            assert one.kind in UNIT_SUFFIX


def test_building_it_says_nothing(bout: Bout) -> None:
    assert bout.said == []


def test_it_says_who_answers(bout: Bout) -> None:
    identity = bout.driver.identify()
    assert identity.maker
    assert identity.model
    assert identity.serial


def test_errors_left_by_others_are_not_blamed_on_us(bout: Bout) -> None:
    bout.simulated.rack.instruments[bout.session.name].execute("NONSENSE")
    bout.driver.identify()
    bout.driver.prepare()


def test_no_preset_ever(bout: Bout) -> None:
    exercise(bout)
    bout.driver.make_safe()
    assert [message for message in bout.said if FORBIDDEN.search(message)] == []


def test_prepared_twice_is_prepared_and_off(bout: Bout) -> None:
    for _ in range(2):
        if bout.spec.role != "dc-supply":
            switch(bout, on=True)
        bout.driver.prepare()
        assert not is_on(bout)


def test_settings_are_read_back(bout: Bout) -> None:
    bout.driver.prepare()
    for quantity in bout.driver.settables:
        for value in fitting(bout, quantity):
            assert bout.driver.set(quantity, value) == pytest.approx(value, rel=1e-6, abs=0.01)
            units = bout.said[-1].split(";")
            header = units[0].split(" ")[0]
            assert f":{header}?" in units, f"{units[0]} was not read back"


def test_a_setting_that_is_not_taken_is_an_error(bout: Bout) -> None:
    bout.driver.prepare()
    for quantity, one in bout.driver.settables.items():
        if one.kind in BEYOND:
            with pytest.raises(InstrumentError):
                bout.driver.set(quantity, BEYOND[one.kind])
            bout.driver.set(quantity, fitting(bout, quantity)[0])


def test_a_level_above_the_ceiling_is_never_said(bout: Bout) -> None:
    bout.driver.prepare()
    levels = [name for name, one in bout.driver.settables.items() if one.kind == "level"]
    before = len(bout.said)
    for quantity in levels:
        with pytest.raises(InstrumentError, match="ceiling"):
            bout.driver.set(quantity, 15.0)
    assert len(bout.said) == before


@pytest.mark.parametrize("value", [math.nan, math.inf])
def test_what_is_no_number_is_never_said(bout: Bout, value: float) -> None:
    bout.driver.prepare()
    before = len(bout.said)
    for quantity in bout.driver.settables:
        with pytest.raises(InstrumentError):
            bout.driver.set(quantity, value)
    assert len(bout.said) == before


def test_unknown_quantities_are_refused(bout: Bout) -> None:
    for use in (lambda: bout.driver.set("loudness", 1.0), lambda: bout.driver.read("loudness")):
        with pytest.raises(InstrumentError, match="loudness"):
            use()


def test_readings_are_numbers(bout: Bout) -> None:
    bout.driver.prepare()
    for quantity in bout.driver.readables:
        assert math.isfinite(bout.driver.read(quantity))


def test_safe_from_any_state_and_twice(bout: Bout) -> None:
    bout.driver.make_safe()
    bout.driver.prepare()
    switch(bout, on=True)
    bout.driver.make_safe()
    assert not is_on(bout)
    bout.driver.make_safe()
    assert not is_on(bout)


@pytest.mark.parametrize("kind", FAULTS)
def test_exchange_n_fails_for_every_n(opponent: Opponent, kind: str) -> None:
    """Whatever fails, it ends in one of our errors, and the instrument can then be made safe and used again."""
    for n in range(1, _length(opponent) + 1):
        with opponent.bout() as bout:
            bout.fail(n, kind)
            told = ""
            try:
                exercise(bout)
            except BenchError as error:
                told = str(error)
            assert not told or bout.session.name in told
            bout.heal()
            bout.driver.make_safe()
            assert not is_on(bout), f"on after {kind} in exchange {n}"
            bout.session.accept_restart()
            exercise(bout)


def _length(opponent: Opponent) -> int:
    with opponent.bout() as bout:
        exercise(bout)
        return len(bout.said)


def test_an_instrument_that_is_gone_is_said_to_be(bout: Bout) -> None:
    bout.driver.prepare()
    bout.simulated.faults.add("connection-reset", at=1, instrument=bout.session.name, times=None, refuse=1000)
    for use in (bout.driver.prepare, bout.driver.identify, *_making_safe(bout)):
        with pytest.raises(LinkError, match=bout.session.name):
            use()


def _making_safe(bout: Bout) -> list[Any]:
    """Making safe must fail aloud where there is something to make safe."""
    return [bout.driver.make_safe] if hasattr(bout.driver, "output") else []
