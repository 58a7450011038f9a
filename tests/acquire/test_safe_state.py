"""Making safe: what is confirmed, what is shouted, and that nothing keeps the rest from being tried."""

from __future__ import annotations

import pytest

from benchrun.acquire.outputs import Outputs
from benchrun.acquire.safe_state import PATIENCE_S, lower, make_safe
from benchrun.errors import LinkError
from tests.acquire.fake_bench import (
    OUTPUTS,
    FakeBench,
    Fault,
    complains,
    dies,
    interrupts,
    no_answer,
    our_defect,
)

ONCE: dict[str, Fault] = {
    "no answer": no_answer,
    "complaint": complains,
    "Ctrl-C": interrupts,
    "our defect": our_defect,
}


def live_bench(fall_s: float = 0.25) -> FakeBench:
    bench = FakeBench(fall_s=fall_s)
    bench.rf = {"probe", "pump"}
    bench.supply_.on = {"gate": True, "drain": True}
    bench.supply_.volts = {"gate": -2.8, "drain": 28.0}
    return bench


def test_all_is_well() -> None:
    bench = live_bench()
    report = make_safe(bench, OUTPUTS, bench.clock)
    assert report.safe
    assert report.confirmed == ("pump off", "probe off", "drain below 1 V", "gate released")
    assert report.text.startswith("sources off, drain off (0.")
    assert report.text.endswith("V read back), gate released: confirmed")
    assert bench.dark
    assert not bench.harm
    assert bench.supply_.on == {"gate": False, "drain": False}


def test_twice_does_no_harm() -> None:
    bench = live_bench()
    make_safe(bench, OUTPUTS, bench.clock)
    assert make_safe(bench, OUTPUTS, bench.clock).safe
    assert not bench.harm


def test_lowering_leaves_the_gate() -> None:
    bench = live_bench()
    report = lower(bench, OUTPUTS, bench.clock)
    assert report.safe
    assert bench.dark
    assert bench.supply_.on == {"gate": True, "drain": False}
    assert "confirmed" not in report.text


@pytest.mark.parametrize("how", ONCE)
def test_any_exchange_may_fail_once(how: str) -> None:
    clean = live_bench()
    make_safe(clean, OUTPUTS, clean.clock)
    assert clean.exchanges > 5
    for n in range(clean.exchanges):
        bench = live_bench()
        bench.faults[n] = ONCE[how]
        report = make_safe(bench, OUTPUTS, bench.clock)
        assert report.safe, report.text
        assert bench.dark
        assert bench.supply_.on == {"gate": False, "drain": False}
        assert not bench.harm
        assert sum(session.reopened for session in bench.sessions.values()) == 1


@pytest.mark.parametrize("name", ["pump", "analyser"])
def test_a_source_that_is_gone_keeps_the_gate_and_nothing_else(name: str) -> None:
    bench = live_bench()
    bench.dead = {name}
    report = make_safe(bench, OUTPUTS, bench.clock)
    label = {"pump": "pump", "analyser": "probe"}[name]
    other = {"pump": "probe", "analyser": "pump"}[name]
    assert report.unconfirmed == (label,)
    assert report.confirmed == (f"{other} off", "drain below 1 V")
    assert f"{label.upper()} NOT CONFIRMED" in report.text
    assert "gate not touched (still at -2.8 V)" in report.text
    assert "did not answer" in " ".join(report.reasons)
    assert bench.supply_.on == {"gate": True, "drain": False}
    assert not bench.harm


def test_a_supply_that_is_gone_is_told_without_its_help() -> None:
    bench = live_bench()
    bench.dead = {"supply"}
    report = make_safe(bench, OUTPUTS, bench.clock)
    assert report.unconfirmed == ("drain",)
    assert (
        report.text == "Made safe: pump off confirmed, probe off confirmed, gate not touched, DRAIN NOT CONFIRMED. "
        "Check it before you touch the bench. By hand: RF off first, then the drain, the gate last"
    )
    assert not bench.rf


def test_a_supply_that_dies_at_any_exchange_never_loses_the_gate() -> None:
    clean = live_bench()
    make_safe(clean, OUTPUTS, clean.clock)
    for n in range(clean.exchanges):
        bench = live_bench()
        bench.faults[n] = dies
        report = make_safe(bench, OUTPUTS, bench.clock)
        assert not bench.harm
        assert not report.safe or (bench.dark and bench.supply_.on == {"gate": False, "drain": False})


def test_a_drain_that_does_not_fall_is_waited_for_and_then_shouted() -> None:
    bench = live_bench(fall_s=1e6)
    report = make_safe(bench, OUTPUTS, bench.clock)
    assert report.unconfirmed == ("drain",)
    assert any("off, and still at 28.0 V" in reason for reason in report.reasons)
    assert PATIENCE_S <= bench.clock.ns * 1e-9 < 3 * PATIENCE_S
    assert bench.supply_.on["gate"]


def test_a_drain_that_falls_slowly_is_waited_for() -> None:
    bench = live_bench(fall_s=8.0)
    assert make_safe(bench, OUTPUTS, bench.clock).safe
    assert not bench.harm


def test_a_receiver_that_still_sees_rf_keeps_the_gate() -> None:
    bench = live_bench()
    report = make_safe(bench, OUTPUTS, bench.clock, lambda: "receiver reflected still sees -12.0 dBm at the pump")
    assert report.unconfirmed == ("RF off",)
    assert "RF OFF NOT CONFIRMED" in report.text
    assert report.reasons == ("receiver reflected still sees -12.0 dBm at the pump",)
    assert bench.supply_.on == {"gate": True, "drain": False}


def test_rf_that_fades_while_the_drain_falls_is_looked_at_again() -> None:
    bench = live_bench()
    seen = iter(["receiver reflected still sees -12.0 dBm at the pump", ""])
    report = make_safe(bench, OUTPUTS, bench.clock, lambda: next(seen))
    assert report.safe
    assert "no RF seen by a receiver" in report.confirmed


def test_a_receiver_that_fails_as_a_witness_is_switched_off_again() -> None:
    bench = live_bench()

    def restarts() -> str:
        bench.rf.add("probe")  # as some analysers are after a power-up
        raise LinkError("analyser: the link broke")

    assert make_safe(bench, OUTPUTS, bench.clock, restarts).safe
    assert bench.dark


@pytest.mark.parametrize("answer", [None, RuntimeError("no"), KeyboardInterrupt()])
def test_a_receiver_that_cannot_look_is_no_obstacle_and_no_witness(answer: BaseException | None) -> None:
    def look() -> None:
        if answer is not None:
            raise answer

    bench = live_bench()
    report = make_safe(bench, OUTPUTS, bench.clock, look)
    assert report.safe
    assert "no RF seen by a receiver" not in report.confirmed


def test_a_receiver_that_is_gone_is_not_waited_for_as_a_witness() -> None:
    bench = live_bench()
    bench.dead = {"analyser"}
    looked: list[bool] = []
    make_safe(bench, OUTPUTS, bench.clock, lambda: looked.append(True) or "")  # type: ignore[func-returns-value]
    assert not looked


def test_a_bench_without_bias_has_only_sources() -> None:
    bench = live_bench()
    outputs = Outputs(OUTPUTS.signals, {}, (), {}, {}, {})
    report = make_safe(bench, outputs, bench.clock)
    assert report.text == "sources off: confirmed"
    assert report.confirmed == ("pump off", "probe off")
