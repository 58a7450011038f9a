"""The receiver as a witness that RF is off."""

from __future__ import annotations

import pytest

from benchrun.acquire.witness import Witness
from tests.acquire.fake_bench import FakeBench, capture


def read(bench: FakeBench, *on: str) -> Witness:
    witness = Witness(lambda: bench.receiver)  # type: ignore[arg-type,return-value]
    bench.rf = set(on)
    wanted = capture((2.2e9, 2.3e9))
    bench.receiver.configure(wanted)
    witness.remember(wanted, bench.receiver.acquire().data)
    bench.rf = set()
    return witness


def test_without_a_reading_there_is_nothing_to_compare_with() -> None:
    bench = FakeBench()
    assert Witness(lambda: bench.receiver).look() is None  # type: ignore[arg-type,return-value]
    assert bench.exchanges == 0


def test_what_was_never_loud_cannot_be_seen_to_go() -> None:
    bench = FakeBench()
    witness = read(bench)
    before = bench.exchanges
    assert witness.look() is None
    assert bench.exchanges == before


def test_off_is_seen() -> None:
    assert read(FakeBench(), "probe", "pump").look() == ""


def test_one_point_is_enough() -> None:
    bench = FakeBench()
    read(bench, "probe").look()
    assert bench.story[-2:] == ["analyser configure 1 points from 2.3e+09", "analyser sweep"]


@pytest.mark.parametrize("tone", ["probe", "pump"])
def test_what_is_still_on_is_named(tone: str) -> None:
    bench = FakeBench()
    witness = read(bench, "probe", "pump")
    bench.rf = {tone}
    assert witness.look() == f"receiver incident still sees 10.0 dBm at the {tone}"


def test_a_level_that_is_not_a_number_is_no_sign_that_rf_is_off() -> None:
    from dataclasses import replace

    bench = FakeBench()
    witness = read(bench, "pump")
    bench.mangle = lambda found: replace(found, data=found.data * float("nan"))
    assert "still sees nan dBm at the pump" in str(witness.look())
