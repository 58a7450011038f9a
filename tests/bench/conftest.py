"""A bench in one page, for mistakes to be put into."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

import pytest

from benchrun.bench import Bench, load_bench

BENCH = """\
benchrun: 1
title: Small bench
instruments:
  pump: {driver: signal-source, address: TCPIP0::192.0.2.1::INSTR, ceiling: 5 dBm, ramp: 3 dB}
  analyser:
    driver: wave-receiver
    address: TCPIP0::192.0.2.2::INSTR
    ceiling: 10 dBm
    limits: {frequency: [10 MHz, 8 GHz], level: [-60 dBm, 8 dBm]}
    source-port: {number: 2, damage: 26 dBm, power-up: -10 dBm}
    tones: coherent
    receiver: {linear: -3 dBm, damage: 15 dBm, compression: {loss: 0.1 dB, phase: -0.39 deg, at: -3 dBm}}
  meter:
    driver: power-meter
    address: TCPIP0::192.0.2.3::INSTR
    sensor: {linear: 33 dBm, damage: 36 dBm, reflection: 0.02, uncertainty: 0.065 dB}
  supply: {driver: dc-supply, address: TCPIP0::192.0.2.4::INSTR}
  ambient: {driver: thermometer, address: TCPIP0::192.0.2.5::INSTR}
parts:
  booster: {kind: amplifier, gain: 30 dB, linear: 36 dBm, damage: 15 dBm}
  coupler: {kind: coupler, coupling: 20 dB, directivity: 37 dB, loss: 0.3 dB, damage: 47 dBm}
  P1: {kind: pad, loss: 10 dB}
  P2: {kind: pad, loss: 10 dB}
  P3: {kind: pad, loss: 20 dB}
signals:
  pump: {instrument: pump, path: [booster], plane: input}
  probe: {instrument: analyser, path: [P2, coupler], plane: output}
receivers:
  incident: {instrument: analyser, receiver: R3, coupler: coupler, arm: incident, path: [P1]}
  reflected: {instrument: analyser, receiver: R4, coupler: coupler, arm: reflected, path: [P3]}
bias:
  gate: {instrument: supply, channel: 1, voltage: [-6 V, 0 V], current-limit: 50 mA, over-voltage: 7 V, pinch-off: -5 V}
  drain: {instrument: supply, channel: 2, voltage: [0 V, 30 V], current-limit: 3 A, over-voltage: 32 V,
    released-below: 1 V}
device:
  gain: 14.5 dB
  saturation: 43 dBm
  reflection: 0.6
  conversion: 0.2
  return-gain: -17 dB
  input-match: -22 dB
  output-match: -22 dB
  maximum: {input: 33 dBm, output: 45 dBm}
"""
Told = Callable[..., list[str]]


@pytest.fixture
def told(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Told:
    """Return what is told of the small bench after replacements: told(old, new, old, new, ...)."""
    monkeypatch.chdir(tmp_path)

    def tell(*changes: str, roles: dict[str, str] | None = None) -> list[str]:
        bench, problems = load_bench(_written(*changes), roles)
        assert (bench is None) == bool(problems)
        return [str(problem) for problem in problems]

    return tell


@pytest.fixture
def bench(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Callable[..., Bench]:
    """Return the small bench after replacements, which must leave it right."""
    monkeypatch.chdir(tmp_path)

    def make(*changes: str) -> Bench:
        made, problems = load_bench(_written(*changes))
        assert problems == []
        assert made is not None
        return made

    return make


def _written(*changes: str) -> Path:
    text = BENCH
    for old, new in zip(changes[::2], changes[1::2], strict=True):
        assert old in text
        text = text.replace(old, new, 1)
    path = Path("b.bench.yaml")
    path.write_text(text, "utf-8")
    return path
