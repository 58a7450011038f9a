"""bring-up: the order that a depletion device survives, the search for the quiescent current, every way it fails."""

from __future__ import annotations

import itertools
from typing import Any

import pytest
from benchrun_plugins.steps import bring_up
from benchrun_plugins.steps.bias_steps import steps
from hypothesis import given, settings
from hypothesis import strategies as st
from pydantic import ValidationError

from benchrun.contract.actions import ProcedureAction, SetAction
from benchrun.errors import InputError, InstrumentError

from .stand_ins import DeviceOnSupply, Scope

EXAMPLE = {
    "gate": "-2.8 V", "drain": "28 V", "quiescent": "350 mA", "within": "10 mA", "gate-range": ["-3.4 V", "-2.2 V"],
}  # fmt: skip


def parameters(**changes: Any) -> dict[str, Any]:
    asked = {key: value for key, value in (EXAMPLE | changes).items() if value is not None}
    action, after = bring_up.expand(bring_up.BringUpModel.model_validate(asked), Scope())
    assert isinstance(action, ProcedureAction)
    assert isinstance(after, SetAction)
    return dict(action.parameters)


def test_expands_to_a_procedure_and_the_drain_voltage_that_stands_after_it() -> None:
    procedure, after = bring_up.expand(bring_up.BringUpModel.model_validate(EXAMPLE), Scope())
    assert isinstance(procedure, ProcedureAction)
    assert procedure.step == "bring-up"
    assert procedure.parameters["quiescent_a"] == 0.35
    assert after == SetAction((("drain.voltage", 28.0),))


def test_brings_the_device_up_in_the_one_order() -> None:
    bench = DeviceOnSupply()
    found = bring_up.execute(parameters(), bench)
    assert abs(found["drain_a"] - 0.35) <= 0.01
    assert bench.volts["drain"] == 28.0
    assert bench.on == {"gate": True, "drain": True}
    assert not bench.damaged
    did = bench.log
    assert did[0] == ("output", "drain", False)
    order = [("trips", "gate"), ("trips", "drain"), ("set", "gate.voltage", -5.0)]
    order += [("output", "gate", True), ("output", "drain", True)]
    assert [did.index(step) for step in order] == sorted(did.index(step) for step in order)
    pinched = did[: did.index(("set", "drain.voltage", 28.0))]
    assert {step for step in pinched if step[:2] == ("set", "gate.voltage")} == {("set", "gate.voltage", -5.0)}
    assert bench.trips["drain"] == {"current": 3.0, "voltage": 32.0, "over_current": True}
    assert bench.said == [f"gate {found['gate_v']:.3g} V, drain 28.0 V, {found['drain_a'] * 1e3:.0f} mA"]


def test_without_a_search_the_gate_stays_where_it_was_asked_to_be() -> None:
    bench = DeviceOnSupply()
    found = bring_up.execute(parameters(quiescent=None, within=None, **{"gate-range": None}), bench)
    assert found["gate_v"] == -2.8


@settings(max_examples=80, deadline=None)
@given(st.floats(-3.6, -2.6), st.floats(0.6, 4.0), st.floats(-3.4, -2.2))
def test_the_search_never_leaves_its_range_and_never_leaps(threshold_v: float, slope: float, start_v: float) -> None:
    bench = DeviceOnSupply(threshold_v, slope)
    asked = parameters(gate=f"{start_v:.4f} V", within="5 mA")
    lowest_a, start_a, highest_a = (slope * max(v - threshold_v, 0.0) ** 2 for v in (-3.4, start_v, -2.2))
    if lowest_a < 0.354 and highest_a > 0.346 and start_a < 2.99:
        assert abs(bring_up.execute(asked, bench)["drain_a"] - 0.35) <= 0.005
    elif lowest_a > 0.356 or highest_a < 0.344 or start_a > 3.01:
        with pytest.raises(InstrumentError):
            bring_up.execute(asked, bench)
    gate = [float(step[2]) for step in bench.log if step[:2] == ("set", "gate.voltage")]  # type: ignore[arg-type]
    assert max(gate, default=-5.0) <= -2.2
    assert all(after - before <= 0.1 + 1e-9 for before, after in itertools.pairwise(gate))


def test_a_device_out_of_reach_is_reported_with_what_was_found() -> None:
    bench = DeviceOnSupply(threshold_v=-2.4)
    with pytest.raises(InstrumentError, match=r"350 mA within 10 mA was not found: 56 mA at -2\.200 V.*go no farther"):
        bring_up.execute(parameters(), bench)


def test_too_much_current_stops_at_once() -> None:
    bench = DeviceOnSupply(threshold_v=-5.5, amperes_per_v2=20.0)
    with pytest.raises(InstrumentError, match=r"drain current 5 A with the gate at -5\.000 V; .* limit is 3 A"):
        bring_up.execute(parameters(), bench)
    assert bench.volts["drain"] == 4.0
    assert bench.volts["gate"] == -5.0


def test_a_trip_is_told() -> None:
    bench = DeviceOnSupply()
    bench.trip_at_a = 0.1
    with pytest.raises(InstrumentError, match="the drain's protection tripped"):
        bring_up.execute(parameters(), bench)


def test_drain_that_is_not_released_leaves_everything_else_untouched() -> None:
    bench = DeviceOnSupply()
    bench.stuck_v["drain"] = 12.0
    with pytest.raises(InstrumentError, match=r"still at 12\.00 V"):
        bring_up.execute(parameters(), bench)
    assert not [step for step in bench.log if step[0] in ("set", "trips") or step[-1] is True]


def test_a_gate_that_does_not_follow_keeps_the_drain_off() -> None:
    bench = DeviceOnSupply()
    bench.stuck_v["gate"] = 0.0
    with pytest.raises(InstrumentError, match="The drain was not switched on"):
        bring_up.execute(parameters(), bench)
    assert ("output", "drain", True) not in bench.log


def test_a_drain_that_does_not_get_there_is_told() -> None:
    bench = DeviceOnSupply()
    real = bench.terminal_v
    bench.terminal_v = lambda bias: min(real(bias), 9.0)  # type: ignore[method-assign]
    with pytest.raises(InstrumentError, match=r"the drain is at 9\.00 V, 28\.00 V was set"):
        bring_up.execute(parameters(), bench)


def test_whatever_exchange_fails_the_gate_was_never_open_under_drain() -> None:
    whole = DeviceOnSupply()
    bring_up.execute(parameters(), whole)
    for n in range(len(whole.log)):
        bench = DeviceOnSupply()
        bench.fail_at = n
        with pytest.raises(InstrumentError, match=f"exchange {n + 1} failed"):
            bring_up.execute(parameters(), bench)
        assert not bench.damaged


def test_a_second_bring_up_starts_from_a_released_drain() -> None:
    bench = DeviceOnSupply()
    bring_up.execute(parameters(), bench)
    bench.log.clear()
    bring_up.execute(parameters(), bench)
    assert bench.log[0] == ("output", "drain", False)
    assert not bench.damaged


def test_a_soak_is_waited_for_and_the_current_looked_at_again() -> None:
    bench = DeviceOnSupply()
    asked = parameters(soak="10 min")
    bring_up.execute(asked, bench)
    assert bench.clock.slept_s >= 600.0
    assert 600.0 < bring_up.duration_s(asked) < 603.0


def test_the_modelled_time_is_enough_and_not_far_off() -> None:
    bench = DeviceOnSupply()
    asked = parameters()
    bring_up.execute(asked, bench)
    exchanges_s = 0.005 * sum(step[0] == "read" for step in bench.log) + 0.001 * len(bench.log)
    took_s = bench.clock.slept_s + exchanges_s
    assert took_s < bring_up.duration_s(asked) < 2.0 * took_s


@pytest.mark.parametrize(
    ("changes", "says"),
    [
        ({"gate": "-1 V"}, "lies outside of gate-range"),
        ({"gate-range": ["-2.2 V", "-3.4 V"]}, "more negative voltage comes first"),
        ({"within": "400 mA"}, "near enough"),
        ({"within": "0 A"}, "near enough"),
    ],
)
def test_a_search_that_makes_no_sense_is_refused_before_the_run(changes: dict[str, Any], says: str) -> None:
    with pytest.raises(InputError, match=says):
        parameters(**changes)


@pytest.mark.parametrize("missing", ["quiescent", "within", "gate-range"])
def test_a_search_needs_all_of_its_parts(missing: str) -> None:
    with pytest.raises(ValidationError, match="needs all three"):
        bring_up.BringUpModel.model_validate({key: value for key, value in EXAMPLE.items() if key != missing})


@given(st.floats(-40, 40), st.floats(-40, 40), st.floats(0.05, 10))
def test_steps_are_even_small_enough_and_arrive(start: float, end: float, largest: float) -> None:
    found = [start, *steps(start, end, largest)]
    assert found[-1] == end or abs(start - end) < 1e-8
    assert all(abs(b - a) <= largest * (1 + 1e-6) for a, b in itertools.pairwise(found))


@pytest.mark.parametrize("changes", [{}, {"quiescent": None, "within": None, "gate-range": None}])
def test_a_pinch_off_above_the_gates_own_voltages_is_refused_before_anything_is_switched(
    changes: dict[str, Any], monkeypatch: pytest.MonkeyPatch
) -> None:
    bench = DeviceOnSupply()
    limits = bench.bias_limits
    monkeypatch.setattr(bench, "bias_limits", lambda bias: {**limits(bias), "pinch_off_v": -1.0})
    with pytest.raises(InputError, match=r"says that -1 V pinches it off"):
        bring_up.execute(parameters(**changes), bench)
    assert bench.log == []
